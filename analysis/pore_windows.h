// The windows of the pores, and the sums over them.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/deficit_cells.h"
#include "analysis/grey_deficit.h"
#include "analysis/pores.h"
#include "io/run_control.h"

namespace halfmark {

// Sums over one pore, in integers so that blocks and threads change no digit. Fractions are in
// 1/PoreField::unit.
struct PoreSums {
  std::int64_t window_voxels = 0, window = 0;  // count and summed fraction
  std::int64_t ring_voxels = 0, ring = 0;      // around the window: sound material, its residual deficit
  std::int64_t label_voxels = 0, label = 0;
  std::array<std::int64_t, 3> moment{};    // summed fraction * index over the label voxels
  std::int64_t weight = 0;                 // its weight
  std::int64_t core_voxels = 0, core = 0;  // voxels deep inside the label
  std::int64_t core_square = 0;            // their summed squared fraction
  double grey = 0;                         // summed grey value over the label voxels; integers are exact
  void add(const PoreSums& other);
};

struct PoreWindows {
  std::vector<PoreSums> sums;  // index: label; [0] unused
  RunLabels windows;
  std::vector<std::int16_t> fraction;  // of the windows' voxels, in order
  std::vector<std::uint8_t> clear;     // 1: clear of the outer face
};

struct WindowSizes {
  double window_voxel = 4;  // voxels of voxel_mm() around the label that belong to the window
  double ring_voxel = 2.5;  // further out: the ring
};

// labels: grown pores, numbered 1 ... count. core: voxels deep inside labels. sign as in find_candidates.
PoreWindows sum_windows(const VolumeSource& source, const GreyDeficit& deficit, const RunLabels& labels,
                        std::int32_t count, const RunMask& core, const WindowSizes& sizes, int sign,
                        const RunControl& control);

// The same over regions made of whole cells: every voxel of a region that is clear of the face and in no
// window of `taken` is label, window and nothing else. region[i]: the region of cell i, 0 none.
PoreWindows sum_regions(const VolumeSource& source, const GreyDeficit& deficit, const DeficitCells& cells,
                        const std::vector<std::int32_t>& region, std::int32_t count, const RunLabels& taken,
                        const RunControl& control);

}  // namespace halfmark
