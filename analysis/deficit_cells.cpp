#include "analysis/deficit_cells.h"

#include <tbb/parallel_for.h>

#include <algorithm>

#include "analysis/pores.h"
#include "analysis/wide_registers.h"

namespace halfmark {

namespace {

constexpr std::int64_t cell_voxels = DeficitCells::edge * DeficitCells::edge * DeficitCells::edge;

// Adds the fractions of a row's voxels that are clear of the face; integers, so that the order does not
// matter.
HALFMARK_FOR_WIDE_REGISTERS
void add_fractions(const float* deficit, const std::uint8_t* usable, std::int64_t count,
                   std::int32_t* __restrict sum, std::int32_t* __restrict voxels) {
  constexpr float unit = static_cast<float>(PoreField::unit);
  for (std::int64_t x = 0; x < count; ++x) {
    const std::int32_t counted = usable[x] >= clear_of_face ? 1 : 0;
    sum[x] += fraction_of(deficit[x] * unit) & -counted;
    voxels[x] += counted;
  }
}

// out[i] = in[i - 1] + in[i] + in[i + 1] along an axis of `count` cells, `stride` apart.
template <class T>
void add_neighbours(const std::vector<T>& in, std::vector<T>& out, std::int64_t count, std::int64_t stride,
                    std::int64_t lines_inner, std::int64_t lines_outer, std::int64_t outer_stride) {
  tbb::parallel_for(std::int64_t{0}, lines_outer, [&](std::int64_t o) {
    for (std::int64_t i = 0; i < count; ++i) {
      for (std::int64_t l = 0; l < lines_inner; ++l) {
        const auto at = static_cast<std::size_t>(o * outer_stride + i * stride + l);
        T sum = in[at];
        if (i > 0) sum += in[at - static_cast<std::size_t>(stride)];
        if (i + 1 < count) sum += in[at + static_cast<std::size_t>(stride)];
        out[at] = sum;
      }
    }
  });
}

// Sums over 3 x 3 x 3 cells.
std::vector<std::int32_t> summed(std::vector<std::int32_t> values, const std::array<std::int64_t, 3>& n) {
  std::vector<std::int32_t> other(values.size());
  add_neighbours(values, other, n[0], 1, 1, n[1] * n[2], n[0]);
  add_neighbours(other, values, n[1], n[0], n[0], n[2], n[0] * n[1]);
  // Along z: rows of the outermost axis, one y at a time.
  add_neighbours(values, other, n[2], n[0] * n[1], n[0], n[1], n[0]);
  return other;
}

}  // namespace

DeficitCells::DeficitCells(const std::array<std::int64_t, 3>& volume) {
  std::size_t cells = 1;
  for (std::size_t a = 0; a < 3; ++a) {
    count_[a] = (volume[a] + edge - 1) / edge;
    cells *= static_cast<std::size_t>(count_[a]);
  }
  sum_.assign(cells, 0);
  voxels_.assign(cells, 0);
}

void DeficitCells::add(const DeficitBlock& block, const VoxelBox& core) {
  const VoxelBox& box = block.box;
  const std::int64_t nx = core.extent(0);
  std::vector<std::int32_t> sum(static_cast<std::size_t>(nx)), voxels(static_cast<std::size_t>(nx));
  for (std::int64_t z0 = core.begin[2]; z0 < core.end[2]; z0 += edge) {
    for (std::int64_t y0 = core.begin[1]; y0 < core.end[1]; y0 += edge) {
      std::fill(sum.begin(), sum.end(), 0);
      std::fill(voxels.begin(), voxels.end(), 0);
      for (std::int64_t z = z0; z < std::min(z0 + edge, core.end[2]); ++z) {
        for (std::int64_t y = y0; y < std::min(y0 + edge, core.end[1]); ++y) {
          const std::int64_t at = ((z - box.begin[2]) * box.extent(1) + (y - box.begin[1])) * box.extent(0) +
                                  (core.begin[0] - box.begin[0]);
          add_fractions(block.deficit.data() + at, block.usable.data() + at, nx, sum.data(), voxels.data());
        }
      }
      const std::size_t first = index_of_voxel(core.begin[0], y0, z0);
      for (std::int64_t x = 0; x < nx; ++x) {
        sum_[first + static_cast<std::size_t>(x / edge)] += sum[static_cast<std::size_t>(x)];
        voxels_[first + static_cast<std::size_t>(x / edge)] += voxels[static_cast<std::size_t>(x)];
      }
    }
  }
}

void DeficitCells::take_out(std::int64_t x, std::int64_t y, std::int64_t z, std::int16_t fraction) {
  const std::size_t cell = index_of_voxel(x, y, z);
  if (voxels_[cell] == 0) return;  // left out already
  sum_[cell] -= fraction;
  --voxels_[cell];
}

void DeficitCells::blank(std::int64_t x, std::int64_t y, std::int64_t z, std::int64_t reach) {
  const std::array<std::int64_t, 3> cell{x / edge, y / edge, z / edge};
  const auto low = [&](std::size_t a) { return std::max<std::int64_t>(0, cell[a] - reach); };
  const auto high = [&](std::size_t a) { return std::min(count_[a] - 1, cell[a] + reach); };
  for (std::int64_t cz = low(2); cz <= high(2); ++cz) {
    for (std::int64_t cy = low(1); cy <= high(1); ++cy) {
      for (std::int64_t cx = low(0); cx <= high(0); ++cx) {
        sum_[index(cx, cy, cz)] = 0;
        voxels_[index(cx, cy, cz)] = 0;
      }
    }
  }
}

std::vector<float> DeficitCells::means() const {
  const std::vector<std::int32_t> sums = summed(sum_, count_), voxels = summed(voxels_, count_);
  std::vector<float> out(sums.size(), not_enough);
  for (std::size_t i = 0; i < out.size(); ++i) {
    if (2 * voxels[i] >= 27 * cell_voxels) {
      out[i] =
          static_cast<float>(static_cast<double>(sums[i]) / PoreField::unit / static_cast<double>(voxels[i]));
    }
  }
  return out;
}

}  // namespace halfmark
