// A set of voxels as runs along x: small, and quick to scan where plain air or plain material is long.
#pragma once

#include <array>
#include <cstdint>
#include <span>
#include <vector>

namespace halfmark {

struct Run {
  std::int32_t begin = 0, end = 0;  // x in [begin, end)
};

struct LabelRun {
  std::int32_t begin = 0, end = 0;
  std::int32_t label = 0;  // >= 1
};

// Rows in order y, then z; runs within a row in rising x, not touching (LabelRun: not overlapping).
template <class R>
class RunRows {
 public:
  RunRows() = default;
  // Starts empty: append rows in order with add_run() and end_row().
  explicit RunRows(const std::array<std::int64_t, 3>& size) : size_(size) { row_start_.push_back(0); }

  const std::array<std::int64_t, 3>& size() const { return size_; }
  // Appends all rows of the planes that follow (a slab's result behind the slabs before it).
  void append(const RunRows& next) {
    const std::size_t offset = runs_.size();
    runs_.insert(runs_.end(), next.runs_.begin(), next.runs_.end());
    for (std::size_t r = 1; r < next.row_start_.size(); ++r)
      row_start_.push_back(offset + next.row_start_[r]);
  }
  void add_run(const R& run) { runs_.push_back(run); }
  void end_row() { row_start_.push_back(runs_.size()); }

  std::span<const R> row(std::int64_t y, std::int64_t z) const {
    const std::size_t r = static_cast<std::size_t>(z * size_[1] + y);
    return {runs_.data() + row_start_[r], row_start_[r + 1] - row_start_[r]};
  }
  std::span<R> row(std::int64_t y, std::int64_t z) {
    const std::size_t r = static_cast<std::size_t>(z * size_[1] + y);
    return {runs_.data() + row_start_[r], row_start_[r + 1] - row_start_[r]};
  }
  const std::vector<R>& runs() const { return runs_; }
  std::vector<R>& runs() { return runs_; }
  // Index of the first run of row (y, z) in runs().
  std::size_t row_begin(std::int64_t y, std::int64_t z) const {
    return row_start_[static_cast<std::size_t>(z * size_[1] + y)];
  }
  bool empty() const { return runs_.empty(); }
  std::int64_t voxel_count() const {
    std::int64_t n = 0;
    for (const R& r : runs_) n += r.end - r.begin;
    return n;
  }

 private:
  std::array<std::int64_t, 3> size_{0, 0, 0};
  std::vector<std::size_t> row_start_;
  std::vector<R> runs_;
};

using RunMask = RunRows<Run>;
using RunLabels = RunRows<LabelRun>;

// All rows of a volume, none with a run.
template <class Rows>
Rows empty_rows(const std::array<std::int64_t, 3>& size) {
  Rows out(size);
  for (std::int64_t r = 0; r < size[1] * size[2]; ++r) out.end_row();
  return out;
}

// Runs of the voxels of one row whose flag is not zero, appended to `mask` as its next row.
void add_row_of_flags(RunMask& mask, const std::uint8_t* flags, std::int64_t count);

// True if voxel (x, y, z) is in the mask; false outside the volume.
bool contains(const RunMask& mask, std::int64_t x, std::int64_t y, std::int64_t z);

}  // namespace halfmark
