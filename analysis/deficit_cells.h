// The grey deficit summed over cells of 4 voxels cubed: what a region of lowered grey adds up to where no
// single pore stands out.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/grey_deficit.h"
#include "analysis/run_mask.h"

namespace halfmark {

class DeficitCells {
 public:
  static constexpr std::int64_t edge = 4;  // voxels; blocks of block_pass.h hold whole cells

  DeficitCells() = default;
  explicit DeficitCells(const std::array<std::int64_t, 3>& volume);

  // Adds the core's voxels that are clear of the outer face. Blocks may be added at the same time.
  void add(const DeficitBlock& block, const VoxelBox& core);
  // Takes a voxel out again that had been added with this fraction.
  void take_out(std::int64_t x, std::int64_t y, std::int64_t z, std::int16_t fraction);
  // Leaves the cells within `reach` cells of a voxel out altogether.
  void blank(std::int64_t x, std::int64_t y, std::int64_t z, std::int64_t reach);

  const std::array<std::int64_t, 3>& count() const { return count_; }
  std::size_t index(std::int64_t cx, std::int64_t cy, std::int64_t cz) const {
    return static_cast<std::size_t>((cz * count_[1] + cy) * count_[0] + cx);
  }
  std::size_t index_of_voxel(std::int64_t x, std::int64_t y, std::int64_t z) const {
    return index(x / edge, y / edge, z / edge);
  }
  // Mean deficit over 3 x 3 x 3 cells (12 voxels wide), share of the contrast; not_enough where less than
  // half of it may be counted.
  std::vector<float> means() const;
  static constexpr float not_enough = -1e30f;

 private:
  std::array<std::int64_t, 3> count_{};
  std::vector<std::int32_t> sum_;     // 1/PoreField::unit
  std::vector<std::int32_t> voxels_;  // counted
};

}  // namespace halfmark
