// Noise from homogeneous blocks: standard deviation after removal of a linear trend, and correlation at
// lag 1.
#pragma once

#include <array>
#include <cstdint>

#include "analysis/field_of_view.h"
#include "analysis/grey_levels.h"
#include "analysis/sample_windows.h"

namespace halfmark {

struct NoiseEstimate {
  double deviation = 0;                        // grey values
  std::array<double, 3> correlation{0, 0, 0};  // lag 1 along x, y, z
  double level = 0;                            // median of the blocks' means, grey values
  std::int64_t clear_voxels = 0;               // that the blocks lie off any edge
  std::int64_t blocks = 0;                     // homogeneous blocks used; 0: nothing found
};

// Blocks whose surroundings lie wholly above `low` and below `high`.
NoiseEstimate estimate_noise(const VolumeSource& source, const SampleWindows& windows,
                             const FieldOfView& field, double low, double high);

// Histogram of the means of 3 x 3 x 3 voxels at places of a grid.
Histogram block_means(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field);

// A first scale before any level is known: the commonest deviation among small blocks.
double commonest_deviation(const VolumeSource& source, const SampleWindows& windows,
                           const FieldOfView& field);

}  // namespace halfmark
