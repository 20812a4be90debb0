// The modes of a grey histogram: one peak per phase of the scan.
#pragma once

#include <vector>

#include "analysis/grey_levels.h"

namespace halfmark {

struct GreyMode {
  double grey = 0;    // of the peak, refined below a bin
  double mass = 0;    // share of the voxels nearer to this mode than to its neighbours' valleys
  double height = 0;  // smoothed counts
  double valley = 0;  // smoothed counts at the higher of the two valleys beside it
};

struct HistogramShape {
  double clipped_low = 0, clipped_high = 0;  // share of the voxels in the type's first and last grey value
  std::vector<GreyMode> modes;               // from low grey to high
};

// `noise`: standard deviation within a phase, grey values: the histogram is smoothed by half of it, and by
// three times the spacing of occupied bins, so that gaps of stretched 8-bit data are no valleys.
HistogramShape find_modes(const Histogram& histogram, double noise, bool integer_type);

}  // namespace halfmark
