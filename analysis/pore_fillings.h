// What fills a pore: air, or something of a grey between air and material (trapped powder, core sand).
#pragma once

#include "analysis/grey_levels.h"
#include "analysis/pore_windows.h"

namespace halfmark {

// A core of fewer voxels says nothing of the filling.
constexpr std::int64_t least_core_voxels = 30;

// Mean deficit of the pore's core, a share of the contrast; 0 where the core is too small.
double plateau_of(const PoreSums& sums);

// A flat grey plateau between air and material that blur cannot explain. The core lies three edge widths
// inside the label, where blur leaves less than 0.3 % of the edge. peak and smoothed_noise: of the smoothed
// deficit, shares of the contrast.
bool is_in_between(const PoreSums& sums, double peak, const GreyLevels& levels, double smoothed_noise);

}  // namespace halfmark
