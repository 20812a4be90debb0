#include "analysis/run_grid.h"

#include <algorithm>
#include <cmath>
#include <map>

namespace halfmark {

namespace {

// Blocks are made larger than 16 voxels where there would be more than this many.
constexpr std::int64_t most_blocks = 1 << 20;
// Pores of fewer runs are searched at once; larger ones first from their middle run, which bounds the search.
constexpr std::size_t small_pore_runs = 8;

struct VoxelBox {
  std::array<std::int64_t, 3> low{}, end{};  // voxels in [low, end)
};

// Voxel steps from the last voxel of one interval to the first of the other; 0 where they overlap.
std::int64_t steps(std::int64_t a_begin, std::int64_t a_end, std::int64_t b_begin, std::int64_t b_end) {
  if (b_begin >= a_end) return b_begin - a_end + 1;
  if (a_begin >= b_end) return a_begin - b_end + 1;
  return 0;
}

Vec3 apart_mm(const VoxelBox& a, const VoxelBox& b, const Vec3& spacing) {
  Vec3 v;
  for (std::size_t k = 0; k < 3; ++k) {
    v[k] = static_cast<double>(steps(a.low[k], a.end[k], b.low[k], b.end[k])) * spacing[k];
  }
  return v;
}

Vec3 apart_mm(const VoxelRun& a, const VoxelRun& b, const Vec3& spacing) {
  return {static_cast<double>(steps(a.begin, a.end, b.begin, b.end)) * spacing[0],
          std::abs(static_cast<double>(a.y - b.y)) * spacing[1],
          std::abs(static_cast<double>(a.z - b.z)) * spacing[2]};
}

VoxelBox box_of(const VoxelRun& r) {
  return {{r.begin, r.y, r.z}, {r.end, std::int64_t{r.y} + 1, std::int64_t{r.z} + 1}};
}

VoxelBox box_of(std::span<const VoxelRun> runs) {
  VoxelBox box = box_of(runs[0]);
  for (const VoxelRun& r : runs) {
    const VoxelBox b = box_of(r);
    for (std::size_t k = 0; k < 3; ++k) {
      box.low[k] = std::min(box.low[k], b.low[k]);
      box.end[k] = std::max(box.end[k], b.end[k]);
    }
  }
  return box;
}

// Least gap of a run to any of a pore's, if it is below `reach_mm`; else something that is not.
double gap_to_pore_mm(std::span<const VoxelRun> pore, const VoxelRun& run, const Vec3& spacing,
                      double reach_mm) {
  const double half_voxels = std::max({spacing[0], spacing[1], spacing[2]});
  double best = std::numeric_limits<double>::infinity();
  double far = (reach_mm + half_voxels) * (reach_mm + half_voxels);
  for (const VoxelRun& own : pore) {
    const Vec3 apart = apart_mm(own, run, spacing);
    if (dot(apart, apart) > far) continue;
    const double gap = voxel_gap_mm(apart, spacing);
    if (gap >= best) continue;
    best = gap;
    far = std::min(far, (best + half_voxels) * (best + half_voxels));
  }
  return best;
}

}  // namespace

double voxel_gap_mm(const Vec3& apart_mm, const Vec3& spacing_mm) {
  const double distance = length(apart_mm);
  if (distance == 0) return 0;
  double voxel = 0;
  for (std::size_t k = 0; k < 3; ++k) voxel = std::max(voxel, std::abs(apart_mm[k]) * spacing_mm[k]);
  return std::max(0.0, distance - voxel / distance);
}

double run_gap_mm(const VoxelRun& a, const VoxelRun& b, const Vec3& spacing_mm) {
  return voxel_gap_mm(apart_mm(a, b, spacing_mm), spacing_mm);
}

RunGrid::RunGrid(std::span<const LabelledRun> runs, const std::array<std::int64_t, 3>& size,
                 const Vec3& spacing_mm)
    : spacing_(spacing_mm) {
  const auto count_blocks = [&] {
    for (std::size_t k = 0; k < 3; ++k) blocks_[k] = (size[k] + edge_ - 1) / edge_;
    return blocks_[0] * blocks_[1] * blocks_[2];
  };
  while (count_blocks() > most_blocks) edge_ *= 2;
  const auto block_of = [&](std::int64_t x, const VoxelRun& r) {
    return static_cast<std::size_t>(((r.z / edge_) * blocks_[1] + r.y / edge_) * blocks_[0] + x / edge_);
  };
  // Each run is cut at the block borders: f(block, piece).
  const auto for_pieces = [&](auto f) {
    for (const LabelledRun& run : runs) {
      for (std::int64_t x = run.voxels.begin; x < run.voxels.end;) {
        const std::int64_t end = std::min<std::int64_t>(run.voxels.end, (x / edge_ + 1) * edge_);
        LabelledRun piece = run;
        piece.voxels.begin = static_cast<std::int32_t>(x);
        piece.voxels.end = static_cast<std::int32_t>(end);
        f(block_of(x, run.voxels), piece);
        x = end;
      }
    }
  };
  start_.assign(static_cast<std::size_t>(count_blocks()) + 1, 0);
  for_pieces([&](std::size_t block, const LabelledRun&) { ++start_[block + 1]; });
  for (std::size_t i = 1; i < start_.size(); ++i) start_[i] += start_[i - 1];
  runs_.resize(start_.back());
  std::vector<std::size_t> next(start_.begin(), start_.end() - 1);
  for_pieces([&](std::size_t block, const LabelledRun& piece) { runs_[next[block]++] = piece; });
}

template <class Visit>
void RunGrid::search(std::span<const VoxelRun> of, std::int32_t own, const double& reach_mm,
                     Visit visit) const {
  const VoxelBox box = box_of(of);
  std::array<std::int64_t, 3> first, last;
  for (std::size_t k = 0; k < 3; ++k) {
    first[k] = box.low[k] / edge_;
    last[k] = (box.end[k] - 1) / edge_;
  }
  const auto visit_block = [&](std::int64_t bx, std::int64_t by, std::int64_t bz) {
    const std::size_t block = static_cast<std::size_t>((bz * blocks_[1] + by) * blocks_[0] + bx);
    if (start_[block] == start_[block + 1]) return;
    const VoxelBox bounds{{bx * edge_, by * edge_, bz * edge_},
                          {(bx + 1) * edge_, (by + 1) * edge_, (bz + 1) * edge_}};
    if (voxel_gap_mm(apart_mm(box, bounds, spacing_), spacing_) > reach_mm) return;
    for (std::size_t i = start_[block]; i < start_[block + 1]; ++i) {
      const LabelledRun& run = runs_[i];
      if (run.label == own) continue;
      if (voxel_gap_mm(apart_mm(box, box_of(run.voxels), spacing_), spacing_) <= reach_mm) visit(run);
    }
  };
  const double least = std::min({spacing_[0], spacing_[1], spacing_[2]});
  const double most = std::max({spacing_[0], spacing_[1], spacing_[2]});
  const std::int64_t shells = std::max({blocks_[0], blocks_[1], blocks_[2]});
  for (std::int64_t r = 0; r < shells; ++r) {
    // From shell r on, at least this many voxel steps lie between along one axis.
    const double between = r == 0 ? 0 : static_cast<double>((r - 1) * edge_ + 1) * least - most;
    if (between > reach_mm) return;
    for (std::int64_t z = std::max<std::int64_t>(0, first[2] - r); z <= std::min(blocks_[2] - 1, last[2] + r);
         ++z) {
      const bool z_shell = z == first[2] - r || z == last[2] + r;
      for (std::int64_t y = std::max<std::int64_t>(0, first[1] - r);
           y <= std::min(blocks_[1] - 1, last[1] + r); ++y) {
        const bool y_shell = y == first[1] - r || y == last[1] + r;
        if (r == 0 || z_shell || y_shell) {
          for (std::int64_t x = std::max<std::int64_t>(0, first[0] - r);
               x <= std::min(blocks_[0] - 1, last[0] + r); ++x) {
            visit_block(x, y, z);
          }
        } else {
          if (first[0] - r >= 0) visit_block(first[0] - r, y, z);
          if (last[0] + r < blocks_[0]) visit_block(last[0] + r, y, z);
        }
      }
    }
  }
}

RunGrid::Nearest RunGrid::nearest(std::span<const VoxelRun> of, std::int32_t own) const {
  double reach = std::numeric_limits<double>::infinity();
  if (of.size() > small_pore_runs) reach = nearest(of.subspan(of.size() / 2, 1), own).gap_mm;
  Nearest best{reach, 0};
  search(of, own, best.gap_mm, [&](const LabelledRun& run) {
    const double gap = gap_to_pore_mm(of, run.voxels, spacing_, best.gap_mm);
    const bool first = best.label == 0 && gap <= best.gap_mm;
    if (first || gap < best.gap_mm || (gap == best.gap_mm && run.label < best.label)) best = {gap, run.label};
  });
  return best.label == 0 ? Nearest{} : best;
}

std::vector<RunGrid::Nearest> RunGrid::within(std::span<const VoxelRun> of, std::int32_t own,
                                              double reach_mm) const {
  std::map<std::int32_t, double> gaps;
  search(of, own, reach_mm, [&](const LabelledRun& run) {
    const double gap = gap_to_pore_mm(of, run.voxels, spacing_, reach_mm);
    if (gap > reach_mm) return;
    const auto [at, fresh] = gaps.try_emplace(run.label, gap);
    if (!fresh) at->second = std::min(at->second, gap);
  });
  std::vector<Nearest> out;
  for (const auto& [label, gap] : gaps) out.push_back({gap, label});
  return out;
}

}  // namespace halfmark
