#include "analysis/pore_runs.h"

namespace halfmark {

std::int64_t voxel_count(std::span<const VoxelRun> runs) {
  std::int64_t n = 0;
  for (const VoxelRun& r : runs) n += r.end - r.begin;
  return n;
}

PoreRuns::PoreRuns(const RunLabels& labels, std::int32_t count)
    : start_(static_cast<std::size_t>(count) + 1, 0) {
  const auto listed = [&](const LabelRun& r) { return r.label >= 1 && r.label <= count; };
  for (const LabelRun& r : labels.runs()) {
    if (listed(r)) ++start_[static_cast<std::size_t>(r.label)];
  }
  for (std::size_t i = 1; i < start_.size(); ++i) start_[i] += start_[i - 1];
  runs_.resize(start_.back());
  std::vector<std::size_t> next(start_.begin(), start_.end() - 1);
  const auto& size = labels.size();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (const LabelRun& r : labels.row(y, z)) {
        if (!listed(r)) continue;
        runs_[next[static_cast<std::size_t>(r.label) - 1]++] = {r.begin, r.end, static_cast<std::int32_t>(y),
                                                                static_cast<std::int32_t>(z)};
      }
    }
  }
}

}  // namespace halfmark
