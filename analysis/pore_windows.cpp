#include "analysis/pore_windows.h"

#include <tbb/enumerable_thread_specific.h>

#include <algorithm>
#include <cmath>
#include <limits>

#include "analysis/block_pass.h"

namespace halfmark {

void PoreSums::add(const PoreSums& o) {
  window_voxels += o.window_voxels;
  window += o.window;
  ring_voxels += o.ring_voxels;
  ring += o.ring;
  label_voxels += o.label_voxels;
  label += o.label;
  for (std::size_t a = 0; a < 3; ++a) moment[a] += o.moment[a];
  weight += o.weight;
  core_voxels += o.core_voxels;
  core += o.core;
  core_square += o.core_square;
  grey += o.grey;
}

namespace {

// Squared distances in 1/distance_unit voxel^2 of voxel_mm().
constexpr double distance_unit = 64;
constexpr std::int32_t no_distance = std::numeric_limits<std::int32_t>::max();

struct RowOffset {
  std::int64_t dy, dz;
  std::int32_t square;
};

struct Stamp {
  std::vector<RowOffset> rows;         // within the reach
  std::vector<std::int32_t> x_square;  // cost of k voxels along x
  std::array<std::int64_t, 3> reach{};
  std::int32_t window = 0, ring = 0;  // squared radii
};

Stamp stamp_of(const VolumeGeometry& geometry, const WindowSizes& sizes) {
  Stamp out;
  const double outer = sizes.window_voxel + sizes.ring_voxel;
  out.window = static_cast<std::int32_t>(sizes.window_voxel * sizes.window_voxel * distance_unit);
  out.ring = static_cast<std::int32_t>(outer * outer * distance_unit);
  std::array<double, 3> scale;
  for (std::size_t a = 0; a < 3; ++a) {
    scale[a] = geometry.spacing_mm[a] / geometry.voxel_mm();
    out.reach[a] = static_cast<std::int64_t>(outer / scale[a]);
  }
  const auto square = [&](std::int64_t k, std::size_t a) {
    return static_cast<double>(k * k) * scale[a] * scale[a] * distance_unit;
  };
  for (std::int64_t k = 0; k <= out.reach[0]; ++k)
    out.x_square.push_back(static_cast<std::int32_t>(std::lround(square(k, 0))));
  for (std::int64_t dz = -out.reach[2]; dz <= out.reach[2]; ++dz) {
    for (std::int64_t dy = -out.reach[1]; dy <= out.reach[1]; ++dy) {
      const double s = square(dy, 1) + square(dz, 2);
      if (s <= out.ring) out.rows.push_back({dy, dz, static_cast<std::int32_t>(std::lround(s))});
    }
  }
  return out;
}

struct BlockResult {
  VoxelBox box;  // of the block: what holds all of its labels
  std::vector<std::uint32_t> row_runs;
  std::vector<LabelRun> runs;
  std::vector<std::int16_t> fraction;
  std::vector<std::uint8_t> clear;
  std::vector<std::pair<std::int32_t, PoreSums>> sums;  // by rising label
};

struct Working {
  DeficitBlock block;
  std::vector<std::int32_t> square, nearest;
  std::vector<PoreSums> sums;       // by slot
  std::vector<std::int32_t> slots;  // labels met
};

// Which of the four rows around a run's row hold all of it under the same label: what lies on that side is
// nearer to them.
struct Covered {
  bool before_y = false, behind_y = false, before_z = false, behind_z = false;
  bool hides(const RowOffset& o) const {
    return (o.dy < 0 && before_y) || (o.dy > 0 && behind_y) || (o.dz < 0 && before_z) ||
           (o.dz > 0 && behind_z);
  }
};

bool holds(const RunLabels& labels, const LabelRun& run, std::int64_t y, std::int64_t z) {
  if (y < 0 || z < 0 || y >= labels.size()[1] || z >= labels.size()[2]) return false;
  const auto row = labels.row(y, z);
  const auto at = std::upper_bound(row.begin(), row.end(), run.begin,
                                   [](std::int32_t x, const LabelRun& r) { return x < r.end; });
  return at != row.end() && at->label == run.label && at->begin <= run.begin && at->end >= run.end;
}

Covered covered_of(const RunLabels& labels, const LabelRun& run, std::int64_t y, std::int64_t z) {
  return {holds(labels, run, y - 1, z), holds(labels, run, y + 1, z), holds(labels, run, y, z - 1),
          holds(labels, run, y, z + 1)};
}

void lower(Working& w, std::int64_t at, std::int32_t square, std::int32_t label) {
  auto& s = w.square[static_cast<std::size_t>(at)];
  auto& n = w.nearest[static_cast<std::size_t>(at)];
  if (square < s || (square == s && label < n)) {
    s = square;
    n = label;
  }
}

// Calls f(run, y, z) for the runs whose stamps reach into the box.
template <class F>
void for_runs_near(const RunLabels& labels, const VoxelBox& box, const Stamp& stamp, const F& f) {
  const auto& size = labels.size();
  for (std::int64_t z = std::max<std::int64_t>(0, box.begin[2] - stamp.reach[2]);
       z < std::min(size[2], box.end[2] + stamp.reach[2]); ++z) {
    for (std::int64_t y = std::max<std::int64_t>(0, box.begin[1] - stamp.reach[1]);
         y < std::min(size[1], box.end[1] + stamp.reach[1]); ++y) {
      for (const LabelRun& run : labels.row(y, z)) {
        if (run.end + stamp.reach[0] <= box.begin[0] || run.begin - stamp.reach[0] >= box.end[0]) continue;
        f(run, y, z);
      }
    }
  }
}

// The part of the box that the stamps of labels can reach; empty (begin = end) where there is none.
VoxelBox reached_box(const RunLabels& labels, const VoxelBox& box, const Stamp& stamp) {
  VoxelBox out{box.end, box.begin};
  bool any = false;
  for_runs_near(labels, box, stamp, [&](const LabelRun& run, std::int64_t y, std::int64_t z) {
    any = true;
    const std::array<std::int64_t, 3> first{run.begin, y, z}, last{run.end - 1, y, z};
    for (std::size_t a = 0; a < 3; ++a) {
      out.begin[a] = std::min(out.begin[a], std::max(box.begin[a], first[a] - stamp.reach[a]));
      out.end[a] = std::max(out.end[a], std::min(box.end[a], last[a] + stamp.reach[a] + 1));
    }
  });
  return any ? out : VoxelBox{box.begin, box.begin};
}

// Squared distance to the nearest label voxel and its label, for every voxel of the box within reach.
void stamp_labels(const RunLabels& labels, const VoxelBox& box, const Stamp& stamp, Working& w) {
  const std::int64_t nx = box.extent(0), ny = box.extent(1);
  w.square.assign(static_cast<std::size_t>(box.voxels()), no_distance);
  w.nearest.assign(static_cast<std::size_t>(box.voxels()), 0);
  for_runs_near(labels, box, stamp, [&](const LabelRun& run, std::int64_t y, std::int64_t z) {
    const Covered covered = covered_of(labels, run, y, z);
    for (const RowOffset& offset : stamp.rows) {
      if (covered.hides(offset)) continue;
      const std::int64_t ty = y + offset.dy, tz = z + offset.dz;
      if (ty < box.begin[1] || tz < box.begin[2] || ty >= box.end[1] || tz >= box.end[2]) continue;
      const std::int64_t row = ((tz - box.begin[2]) * ny + (ty - box.begin[1])) * nx - box.begin[0];
      const std::int64_t b = std::max<std::int64_t>(run.begin, box.begin[0]),
                         e = std::min<std::int64_t>(run.end, box.end[0]);
      for (std::int64_t x = b; x < e; ++x) lower(w, row + x, offset.square, run.label);
      for (std::int64_t k = 1; k <= stamp.reach[0]; ++k) {
        const std::int32_t square = offset.square + stamp.x_square[static_cast<std::size_t>(k)];
        if (square > stamp.ring) break;
        const std::int64_t left = run.begin - k, right = run.end - 1 + k;
        if (left >= box.begin[0] && left < box.end[0]) lower(w, row + left, square, run.label);
        if (right >= box.begin[0] && right < box.end[0]) lower(w, row + right, square, run.label);
      }
    }
  });
}

std::int16_t to_fraction(float deficit) {
  return static_cast<std::int16_t>(fraction_of(deficit * static_cast<float>(PoreField::unit)));
}

template <class T>
void sum_block(const GreyPlanes& planes, const std::array<std::int64_t, 3>& size, const RunMask& core,
               const VoxelBox& box, std::int32_t window, int sign, const std::vector<std::int32_t>& slot_of,
               Working& w, BlockResult& out) {
  const T* greys = reinterpret_cast<const T*>(planes.voxels);
  const std::int64_t nx = box.extent(0), ny = box.extent(1);
  for (std::int64_t z = box.begin[2]; z < box.end[2]; ++z) {
    for (std::int64_t y = box.begin[1]; y < box.end[1]; ++y) {
      const std::int64_t row = ((z - box.begin[2]) * ny + (y - box.begin[1])) * nx - box.begin[0];
      const T* grey_row = greys + ((z - planes.z_begin) * size[1] + y) * size[0];
      const std::size_t before = out.runs.size();
      for (std::int64_t x = box.begin[0]; x < box.end[0]; ++x) {
        const auto at = static_cast<std::size_t>(row + x);
        const std::int32_t label = w.nearest[at];
        if (label == 0 || w.block.usable[at] == 0) continue;
        PoreSums& sums = w.sums[static_cast<std::size_t>(slot_of[static_cast<std::size_t>(label)])];
        const std::int16_t fraction = to_fraction(sign > 0 ? w.block.deficit[at] : -w.block.deficit[at]);
        if (w.square[at] > window) {
          ++sums.ring_voxels;
          sums.ring += fraction;
          continue;
        }
        ++sums.window_voxels;
        sums.window += fraction;
        const auto x32 = static_cast<std::int32_t>(x);
        if (out.runs.size() > before && out.runs.back().end == x32 && out.runs.back().label == label) {
          ++out.runs.back().end;
        } else {
          out.runs.push_back({x32, x32 + 1, label});
        }
        out.fraction.push_back(fraction);
        out.clear.push_back(w.block.usable[at] >= clear_of_face);
        if (w.square[at] != 0) continue;
        ++sums.label_voxels;
        sums.label += fraction;
        const std::int64_t weight = std::max<std::int64_t>(fraction, 0);
        sums.weight += weight;
        sums.moment[0] += weight * x;
        sums.moment[1] += weight * y;
        sums.moment[2] += weight * z;
        sums.grey += static_cast<double>(grey_row[x]);
      }
      for (const Run& run : core.row(y, z)) {
        for (std::int64_t x = std::max<std::int64_t>(run.begin, box.begin[0]);
             x < std::min<std::int64_t>(run.end, box.end[0]); ++x) {
          const auto at = static_cast<std::size_t>(row + x);
          if (w.nearest[at] == 0 || w.block.usable[at] == 0) continue;
          PoreSums& sums = w.sums[static_cast<std::size_t>(slot_of[static_cast<std::size_t>(w.nearest[at])])];
          const std::int64_t share = to_fraction(sign > 0 ? w.block.deficit[at] : -w.block.deficit[at]);
          ++sums.core_voxels;
          sums.core += share;
          sums.core_square += share * share;
        }
      }
      out.row_runs.push_back(static_cast<std::uint32_t>(out.runs.size() - before));
    }
  }
}

void join_layer(const BlockGrid& grid, std::int64_t layer, const std::vector<BlockResult>& blocks,
                PoreWindows& out) {
  std::vector<std::size_t> next_run(blocks.size(), 0), next_value(blocks.size(), 0);
  const VoxelBox first = grid.box(layer, 0);
  for (std::int64_t z = first.begin[2]; z < first.end[2]; ++z) {
    for (std::int64_t y = 0; y < grid.size[1]; ++y) {
      LabelRun open{0, -1, 0};
      for (std::int64_t bx = 0; bx < grid.count[0]; ++bx) {
        const auto b = static_cast<std::size_t>(y / BlockSizes::y * grid.count[0] + bx);
        const BlockResult& block = blocks[b];
        if (block.row_runs.empty()) continue;
        const VoxelBox& box = block.box;
        if (y < box.begin[1] || z < box.begin[2] || y >= box.end[1] || z >= box.end[2]) continue;
        const auto row = static_cast<std::size_t>((z - box.begin[2]) * box.extent(1) + (y - box.begin[1]));
        for (std::uint32_t i = 0; i < block.row_runs[row]; ++i) {
          const LabelRun run = block.runs[next_run[b]++];
          const auto length = static_cast<std::ptrdiff_t>(run.end - run.begin);
          const auto from = block.fraction.begin() + static_cast<std::ptrdiff_t>(next_value[b]);
          out.fraction.insert(out.fraction.end(), from, from + length);
          const auto clear = block.clear.begin() + static_cast<std::ptrdiff_t>(next_value[b]);
          out.clear.insert(out.clear.end(), clear, clear + length);
          next_value[b] += static_cast<std::size_t>(length);
          if (open.end == run.begin && open.label == run.label) {
            open.end = run.end;
          } else {
            if (open.end >= 0) out.windows.add_run(open);
            open = run;
          }
        }
      }
      if (open.end >= 0) out.windows.add_run(open);
      out.windows.end_row();
    }
  }
  for (const BlockResult& block : blocks) {
    for (const auto& [label, sums] : block.sums) out.sums[static_cast<std::size_t>(label)].add(sums);
  }
}

// Sums over blocks: assign(box, working) fills `square` and `nearest` and tells whether any voxel has a
// label; drop(box, working), after the deficits are there, may take labels off again.
template <class Assign, class Drop>
PoreWindows sum_blocks(const VolumeSource& source, const GreyDeficit& deficit, std::int32_t count,
                       const RunMask& core, std::int32_t window, int sign, const RunControl& control,
                       const Assign& assign, const Drop& drop) {
  const VolumeGeometry& geometry = source.geometry();
  const BlockGrid grid(geometry.size);
  PoreWindows out;
  out.sums.resize(static_cast<std::size_t>(count) + 1);
  out.windows = RunLabels(geometry.size);
  std::vector<BlockResult> results(static_cast<std::size_t>(grid.per_layer()));
  tbb::enumerable_thread_specific<Working> working;
  tbb::enumerable_thread_specific<std::vector<std::int32_t>> slot_tables(
      [&] { return std::vector<std::int32_t>(static_cast<std::size_t>(count) + 1, -1); });
  for_blocks(
      source, deficit.reach(), control,
      [&](std::int64_t, std::int64_t b, const VoxelBox& whole, const GreyPlanes& planes) {
        BlockResult& result = results[static_cast<std::size_t>(b)];
        result = {};
        Working& w = working.local();
        VoxelBox box = whole;
        if (!assign(box, w) || !deficit.fill(box, planes, w.block)) return;
        result.box = box;
        drop(box, w);
        std::vector<std::int32_t>& slot_of = slot_tables.local();
        w.slots.clear();
        w.sums.clear();
        for (const std::int32_t label : w.nearest) {
          if (label == 0 || slot_of[static_cast<std::size_t>(label)] >= 0) continue;
          slot_of[static_cast<std::size_t>(label)] = static_cast<std::int32_t>(w.slots.size());
          w.slots.push_back(label);
        }
        w.sums.resize(w.slots.size());
        visit_voxel_type(source.voxel_type(), [&](auto* type) {
          sum_block<std::remove_pointer_t<decltype(type)>>(planes, geometry.size, core, box, window, sign,
                                                           slot_of, w, result);
        });
        for (std::size_t i = 0; i < w.slots.size(); ++i) {
          result.sums.emplace_back(w.slots[i], w.sums[i]);
          slot_of[static_cast<std::size_t>(w.slots[i])] = -1;
        }
      },
      [&](std::int64_t layer) {
        join_layer(grid, layer, results, out);
        control.step("pores",
                     0.6 + 0.4 * static_cast<double>(layer + 1) / static_cast<double>(grid.count[2]));
      });
  return out;
}

// Labels of the cells' regions, voxel by voxel. False if the box holds none.
bool assign_regions(const std::vector<std::int32_t>& region, const DeficitCells& cells, const VoxelBox& box,
                    Working& w) {
  bool any = false;
  const std::int64_t nx = box.extent(0), ny = box.extent(1);
  for (std::int64_t z = box.begin[2]; z < box.end[2]; ++z) {
    for (std::int64_t y = box.begin[1]; y < box.end[1]; ++y) {
      for (std::int64_t x = box.begin[0]; x < box.end[0]; x += DeficitCells::edge) {
        const std::int32_t label = region[cells.index_of_voxel(x, y, z)];
        if (label == 0) continue;
        if (!any) {
          w.square.assign(static_cast<std::size_t>(box.voxels()), 0);
          w.nearest.assign(static_cast<std::size_t>(box.voxels()), 0);
          any = true;
        }
        const std::int64_t at = ((z - box.begin[2]) * ny + (y - box.begin[1])) * nx + x - box.begin[0];
        std::fill_n(w.nearest.begin() + at, std::min(DeficitCells::edge, box.end[0] - x), label);
      }
    }
  }
  return any;
}

// Leaves only voxels clear of the face and in no window.
void drop_taken(const RunLabels& taken, const VoxelBox& box, Working& w) {
  for (std::size_t i = 0; i < w.nearest.size(); ++i) {
    if (w.block.usable[i] < clear_of_face) w.nearest[i] = 0;
  }
  const std::int64_t nx = box.extent(0), ny = box.extent(1);
  for (std::int64_t z = box.begin[2]; z < box.end[2]; ++z) {
    for (std::int64_t y = box.begin[1]; y < box.end[1]; ++y) {
      const std::int64_t row = ((z - box.begin[2]) * ny + (y - box.begin[1])) * nx - box.begin[0];
      for (const LabelRun& run : taken.row(y, z)) {
        for (std::int64_t x = std::max<std::int64_t>(run.begin, box.begin[0]);
             x < std::min<std::int64_t>(run.end, box.end[0]); ++x)
          w.nearest[static_cast<std::size_t>(row + x)] = 0;
      }
    }
  }
}

}  // namespace

PoreWindows sum_windows(const VolumeSource& source, const GreyDeficit& deficit, const RunLabels& labels,
                        std::int32_t count, const RunMask& core, const WindowSizes& sizes, int sign,
                        const RunControl& control) {
  const Stamp stamp = stamp_of(source.geometry(), sizes);
  return sum_blocks(
      source, deficit, count, core, stamp.window, sign, control,
      [&](VoxelBox& box, Working& w) {
        box = reached_box(labels, box, stamp);
        if (box.voxels() == 0) return false;
        stamp_labels(labels, box, stamp, w);
        return true;
      },
      [](const VoxelBox&, Working&) {});
}

PoreWindows sum_regions(const VolumeSource& source, const GreyDeficit& deficit, const DeficitCells& cells,
                        const std::vector<std::int32_t>& region, std::int32_t count, const RunLabels& taken,
                        const RunControl& control) {
  return sum_blocks(
      source, deficit, count, empty_rows<RunMask>(source.geometry().size), 0, 1, control,
      [&](const VoxelBox& box, Working& w) { return assign_regions(region, cells, box, w); },
      [&](const VoxelBox& box, Working& w) { drop_taken(taken, box, w); });
}

}  // namespace halfmark
