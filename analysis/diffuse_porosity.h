// Diffuse porosity: regions, wider than any single pore's window, in which the grey level is lowered although
// no pore stands out (micro-shrinkage). Looked for after the pores, in what their windows leave.
//
// The mean deficit over 12 voxels cubed is compared with its own scatter in sound material; seeds grow over
// their 26-neighbours down to half of the seed threshold. A found pore that is weak all over, and whose
// surroundings 12 voxels wide are as weak as itself, is such a region too and no pore.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/deficit_cells.h"
#include "analysis/pore_windows.h"
#include "io/run_control.h"

namespace halfmark {

struct DiffuseRegions {
  std::int32_t count = 0;
  std::vector<std::int32_t> region;     // per cell; 0: none
  std::vector<float> peak;              // by region: greatest mean deficit, share of the contrast; [0] unused
  std::vector<std::uint8_t> swallowed;  // by label of the pores: 1: part of a region
  double noise = 0, seed_threshold = 0;  // of the mean deficit
};

// cells: all voxels clear of the face; the pores' windows are taken out of them here. unlisted: voxels of
// pores too small to be listed; their cells are left out. level_uncertainty: of the material level, share of
// the contrast.
DiffuseRegions find_diffuse_regions(DeficitCells& cells, const PoreWindows& pores,
                                    const std::vector<std::array<std::int32_t, 3>>& unlisted,
                                    double level_uncertainty, const RunControl& control);

}  // namespace halfmark
