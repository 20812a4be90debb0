// Voxels whose smoothed grey deficit stands out: what the pores grow in.
#pragma once

#include <vector>

#include "analysis/deficit_cells.h"
#include "analysis/grey_deficit.h"
#include "io/run_control.h"

namespace halfmark {

struct PoreCandidates {
  double smoothed_noise =
      0;  // standard deviation of the smoothed deficit in sound material, share of the contrast
  double white_ratio = 1;     // its variance over what white noise of the measured size would leave
  double seed_threshold = 0;  // a peak of a pore reaches at least this
  double low_threshold = 0;   // candidates reach at least this
  double kernel_voxel = 0;    // Gaussian width of the smoothing, voxels
  RunMask mask;               // the candidates
  std::vector<float> values;  // their smoothed deficit, in the order of the mask's voxels
  DeficitCells cells;         // of every voxel clear of the face; only for pores
};

// sign: +1 for pores, -1 for inclusions (the deficit's negative).
PoreCandidates find_candidates(const VolumeSource& source, const GreyDeficit& deficit,
                               const GreyLevels& levels, int sign, const RunControl& control);

}  // namespace halfmark
