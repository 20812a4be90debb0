// The label voxels of each pore as runs of its own: what calipers, area, depth and spacing are measured on.
// Built on run_mask.h; next: calipers.h, crofton_area.h, pore_spacing.h.
#pragma once

#include <cstdint>
#include <span>
#include <vector>

#include "analysis/run_mask.h"

namespace halfmark {

struct VoxelRun {
  std::int32_t begin = 0, end = 0;  // x in [begin, end)
  std::int32_t y = 0, z = 0;
};

std::int64_t voxel_count(std::span<const VoxelRun> runs);

class PoreRuns {
 public:
  // Labels in 1 .. count; other labels are left out.
  PoreRuns(const RunLabels& labels, std::int32_t count);

  // Runs of one label, ordered by z, then y, then x.
  std::span<const VoxelRun> of(std::int32_t label) const {
    const auto i = static_cast<std::size_t>(label);
    return {runs_.data() + start_[i - 1], start_[i] - start_[i - 1]};
  }
  std::int32_t count() const { return static_cast<std::int32_t>(start_.size()) - 1; }

 private:
  std::vector<std::size_t> start_;  // of label i + 1; one more at the end
  std::vector<VoxelRun> runs_;
};

}  // namespace halfmark
