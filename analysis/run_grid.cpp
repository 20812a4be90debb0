#include "analysis/run_grid.h"

#include <tbb/enumerable_thread_specific.h>
#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <map>

namespace halfmark {

namespace {

// Blocks are made larger than 16 voxels where there would be more than this many, up to what a byte can tell.
constexpr std::int64_t most_blocks = 1 << 20, largest_edge = 256;
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

// The runs of a pore with the bounds of each plane of them, so that whole planes are passed over.
class PoreSurface {
 public:
  explicit PoreSurface(std::span<const VoxelRun> runs) : runs_(runs) {
    for (std::size_t i = 0; i < runs.size(); ++i) {
      const VoxelRun& r = runs[i];
      if (i == 0 || r.z != runs[i - 1].z) planes_.push_back({r.begin, r.end, r.y, r.y, i, i});
      Plane& p = planes_.back();
      p.begin = std::min(p.begin, r.begin);
      p.end = std::max(p.end, r.end);
      p.y_low = std::min(p.y_low, r.y);
      p.y_high = std::max(p.y_high, r.y);
      p.last = i;
    }
  }

  // Least gap of a run to any of the pore's, if it is at most `reach_mm`; else something larger.
  double gap_mm(const VoxelRun& run, const Vec3& spacing, double reach_mm) const {
    const double voxel = std::max({spacing[0], spacing[1], spacing[2]});
    double best = std::numeric_limits<double>::infinity();
    double far = (reach_mm + voxel) * (reach_mm + voxel);
    const auto squared = [](double x, double y, double z) { return x * x + y * y + z * z; };
    for (const Plane& plane : planes_) {
      const double z = spacing[2] * (runs_[plane.first].z - run.z);
      const double plane_y =
          spacing[1] * static_cast<double>(steps(plane.y_low, plane.y_high + 1, run.y, run.y + 1));
      const double plane_x =
          spacing[0] * static_cast<double>(steps(plane.begin, plane.end, run.begin, run.end));
      if (squared(plane_x, plane_y, z) > far) continue;
      for (std::size_t i = plane.first; i <= plane.last; ++i) {
        const VoxelRun& own = runs_[i];
        const double y = spacing[1] * (own.y - run.y);
        const double x = spacing[0] * static_cast<double>(steps(own.begin, own.end, run.begin, run.end));
        if (squared(x, y, z) > far) continue;
        const double gap = voxel_gap_mm({x, y, z}, spacing);
        if (gap >= best) continue;
        best = gap;
        far = std::min(far, (best + voxel) * (best + voxel));
      }
    }
    return best;
  }

 private:
  struct Plane {
    std::int32_t begin, end, y_low, y_high;
    std::size_t first, last;
  };
  std::span<const VoxelRun> runs_;
  std::vector<Plane> planes_;
};

}  // namespace

double voxel_gap_mm(const Vec3& apart_mm, const Vec3& spacing_mm) {
  const double distance = length(apart_mm);
  if (distance == 0) return 0;
  double voxel = 0;
  for (std::size_t k = 0; k < 3; ++k) voxel = std::max(voxel, std::abs(apart_mm[k]) * spacing_mm[k]);
  return std::max(0.0, distance - voxel / distance);
}

RunGrid::RunGrid(const std::array<std::int64_t, 3>& size, const Vec3& spacing_mm, const PlaneRuns& plane_runs)
    : spacing_(spacing_mm) {
  const auto count_blocks = [&] {
    for (std::size_t k = 0; k < 3; ++k) blocks_[k] = (size[k] + edge_ - 1) / edge_;
    return blocks_[0] * blocks_[1] * blocks_[2];
  };
  while (count_blocks() > most_blocks && edge_ < largest_edge) edge_ *= 2;
  layers_.resize(static_cast<std::size_t>(blocks_[2]));
  tbb::enumerable_thread_specific<std::vector<LabelledRun>> scratch;
  tbb::parallel_for(std::int64_t{0}, blocks_[2], [&](std::int64_t layer) {
    std::vector<LabelledRun>& runs = scratch.local();
    runs.clear();
    for (std::int64_t z = layer * edge_; z < std::min((layer + 1) * edge_, size[2]); ++z) plane_runs(z, runs);
    fill_layer(layer, runs);
  });
}

void RunGrid::fill_layer(std::int64_t layer, const std::vector<LabelledRun>& runs) {
  // Each run is cut at the block borders: f(block, first voxel, end).
  const auto for_pieces = [&](const LabelledRun& run, auto f) {
    const std::int64_t row = (run.voxels.y / edge_) * blocks_[0];
    for (std::int64_t x = run.voxels.begin; x < run.voxels.end;) {
      const std::int64_t end = std::min<std::int64_t>(run.voxels.end, (x / edge_ + 1) * edge_);
      f(static_cast<std::size_t>(row + x / edge_), x, end);
      x = end;
    }
  };
  Layer& out = layers_[static_cast<std::size_t>(layer)];
  if (runs.empty()) return;
  out.start.assign(static_cast<std::size_t>(blocks_[0] * blocks_[1]) + 1, 0);
  for (const LabelledRun& run : runs) {
    for_pieces(run, [&](std::size_t block, std::int64_t, std::int64_t) { ++out.start[block + 1]; });
  }
  for (std::size_t i = 1; i < out.start.size(); ++i) out.start[i] += out.start[i - 1];
  out.runs.resize(out.start.back());
  std::vector<std::uint32_t> next(out.start.begin(), out.start.end() - 1);
  const auto within = [&](std::int64_t at) { return static_cast<std::uint8_t>(at % edge_); };
  for (const LabelledRun& run : runs) {
    for_pieces(run, [&](std::size_t block, std::int64_t first, std::int64_t end) {
      out.runs[next[block]++] = {within(first), within(end - 1), within(run.voxels.y), within(run.voxels.z),
                                 run.label};
    });
  }
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
  const double most = std::max({spacing_[0], spacing_[1], spacing_[2]});
  const auto visit_block = [&](std::int64_t bx, std::int64_t by, std::int64_t bz) {
    const Layer& layer = layers_[static_cast<std::size_t>(bz)];
    if (layer.start.empty()) return;
    const std::size_t block = static_cast<std::size_t>(by * blocks_[0] + bx);
    if (layer.start[block] == layer.start[block + 1]) return;
    const VoxelBox bounds{{bx * edge_, by * edge_, bz * edge_},
                          {(bx + 1) * edge_, (by + 1) * edge_, (bz + 1) * edge_}};
    if (voxel_gap_mm(apart_mm(box, bounds, spacing_), spacing_) > reach_mm) return;
    for (std::uint32_t i = layer.start[block]; i < layer.start[block + 1]; ++i) {
      const PackedRun& packed = layer.runs[i];
      if (packed.label == own) continue;
      const LabelledRun run{{static_cast<std::int32_t>(bounds.low[0] + packed.first),
                             static_cast<std::int32_t>(bounds.low[0] + packed.last + 1),
                             static_cast<std::int32_t>(bounds.low[1] + packed.y),
                             static_cast<std::int32_t>(bounds.low[2] + packed.z)},
                            packed.label};
      const Vec3 apart = apart_mm(box, box_of(run.voxels), spacing_);
      // No gap is shorter than the way between the centres less one voxel: spares most square roots.
      if (dot(apart, apart) > (reach_mm + most) * (reach_mm + most)) continue;
      if (voxel_gap_mm(apart, spacing_) <= reach_mm) visit(run);
    }
  };
  const double least = std::min({spacing_[0], spacing_[1], spacing_[2]});
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
  const PoreSurface pore(of);
  Nearest best{reach, 0};
  search(of, own, best.gap_mm, [&](const LabelledRun& run) {
    const double gap = pore.gap_mm(run.voxels, spacing_, best.gap_mm);
    const bool first = best.label == 0 && gap <= best.gap_mm;
    if (first || gap < best.gap_mm || (gap == best.gap_mm && run.label < best.label)) best = {gap, run.label};
  });
  return best.label == 0 ? Nearest{} : best;
}

std::vector<RunGrid::Nearest> RunGrid::within(std::span<const VoxelRun> of, std::int32_t own,
                                              double reach_mm) const {
  const PoreSurface pore(of);
  std::map<std::int32_t, double> gaps;
  search(of, own, reach_mm, [&](const LabelledRun& run) {
    const double gap = pore.gap_mm(run.voxels, spacing_, reach_mm);
    if (gap > reach_mm) return;
    const auto [at, fresh] = gaps.try_emplace(run.label, gap);
    if (!fresh) at->second = std::min(at->second, gap);
  });
  std::vector<Nearest> out;
  for (const auto& [label, gap] : gaps) out.push_back({gap, label});
  return out;
}

}  // namespace halfmark
