#include "analysis/pore_spacing.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>

#include "analysis/pore_shape.h"
#include "analysis/run_grid.h"

namespace halfmark {

namespace {

// counts(pore) -> whether its label goes into the grid.
template <class F>
RunGrid neighbour_grid(const SegmentedPores& found, const VolumeGeometry& geometry, F counts) {
  return RunGrid(geometry.size, geometry.spacing_mm, [&](std::int64_t z, std::vector<LabelledRun>& out) {
    for (std::int64_t y = 0; y < geometry.size[1]; ++y) {
      for (const LabelRun& r : found.field.labels.row(y, z)) {
        if (!counts(found.pores[static_cast<std::size_t>(r.label) - 1])) continue;
        out.push_back(
            {{r.begin, r.end, static_cast<std::int32_t>(y), static_cast<std::int32_t>(z)}, r.label});
      }
    }
  });
}

void add_run(std::vector<LabelledRun>& out, std::int32_t begin, std::int32_t end, std::int64_t y,
             std::int64_t z) {
  out.push_back({{begin, end, static_cast<std::int32_t>(y), static_cast<std::int32_t>(z)}, 1});
}

// Voxels of `other` that are not in `row`, as runs of the row (y, z).
void add_difference(std::span<const Run> other, std::span<const Run> row, std::int64_t y, std::int64_t z,
                    std::vector<LabelledRun>& out) {
  std::size_t k = 0;
  for (const Run& o : other) {
    std::int32_t at = o.begin;
    while (k < row.size() && row[k].end <= at) ++k;
    for (std::size_t i = k; i < row.size() && row[i].begin < o.end; ++i) {
      if (row[i].begin > at) add_run(out, at, row[i].begin, y, z);
      at = std::max(at, row[i].end);
    }
    if (at < o.end) add_run(out, at, o.end, y, z);
  }
}

// The outside voxels that share a face with the inside: the nearest outside voxel of any inside voxel is one
// of them. Some may be listed twice.
RunGrid outer_border(const RunMask& inside, const Vec3& spacing_mm) {
  const auto& size = inside.size();
  return RunGrid(size, spacing_mm, [&](std::int64_t z, std::vector<LabelledRun>& out) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      const auto row = inside.row(y, z);
      for (const Run& r : row) {
        if (r.begin > 0) add_run(out, r.begin - 1, r.begin, y, z);
        if (r.end < size[0]) add_run(out, r.end, r.end + 1, y, z);
      }
      if (y > 0) add_difference(inside.row(y - 1, z), row, y, z, out);
      if (y + 1 < size[1]) add_difference(inside.row(y + 1, z), row, y, z, out);
      if (z > 0) add_difference(inside.row(y, z - 1), row, y, z, out);
      if (z + 1 < size[2]) add_difference(inside.row(y, z + 1), row, y, z, out);
    }
  });
}

template <class F>
void for_each_pore(std::vector<Pore>& pores, const RunControl& control, F f) {
  tbb::parallel_for(std::size_t{0}, pores.size(), [&](std::size_t i) {
    if (!control.cancelled()) f(pores[i]);
  });
  control.throw_if_cancelled();
}

std::size_t index_of(std::int32_t id) { return static_cast<std::size_t>(id) - 1; }

}  // namespace

bool counts_as_neighbour(PoreKind kind) { return kind != PoreKind::inclusion && kind != PoreKind::diffuse; }

void measure_spacing(SegmentedPores& found, const VolumeGeometry& geometry,
                     const std::vector<double>& surface_shift_mm, const RunControl& control) {
  const PoreRuns runs(found.field.labels, static_cast<std::int32_t>(found.pores.size()));
  const RunGrid grid =
      neighbour_grid(found, geometry, [](const Pore& pore) { return counts_as_neighbour(pore.kind); });
  for_each_pore(found.pores, control, [&](Pore& pore) {
    pore.spacing_mm = not_measured;
    pore.nearest_id = 0;
    if (pore.kind == PoreKind::diffuse || runs.of(pore.id).empty()) return;
    const RunGrid::Nearest nearest = grid.nearest(runs.of(pore.id), pore.id);
    if (nearest.label == 0) return;
    pore.nearest_id = nearest.label;
    pore.spacing_mm = std::max(0.0, nearest.gap_mm + surface_shift_mm[index_of(pore.id)] +
                                        surface_shift_mm[index_of(nearest.label)]);
  });
}

void measure_depth(SegmentedPores& found, const VolumeGeometry& geometry, const PartMap& part,
                   const std::vector<double>& surface_shift_mm, const RunControl& control) {
  for (Pore& pore : found.pores) pore.depth_mm = part.has_outside && pore.open ? 0 : not_measured;
  if (!part.has_outside) return;
  const PoreRuns runs(found.field.labels, static_cast<std::int32_t>(found.pores.size()));
  const RunGrid grid = outer_border(part.inside, geometry.spacing_mm);
  for_each_pore(found.pores, control, [&](Pore& pore) {
    if (pore.open || runs.of(pore.id).empty()) return;
    const RunGrid::Nearest nearest = grid.nearest(runs.of(pore.id), 0);
    if (nearest.label == 0) return;
    pore.depth_mm = std::max(0.0, nearest.gap_mm + surface_shift_mm[index_of(pore.id)]);
  });
}

std::vector<PoreGap> gaps_between_pores(const SegmentedPores& found, const VolumeGeometry& geometry,
                                        const std::vector<double>& reach_mm, const RunControl& control) {
  const PoreRuns runs(found.field.labels, static_cast<std::int32_t>(found.pores.size()));
  const auto counts = [&](const Pore& pore) {
    return counts_as_neighbour(pore.kind) && reach_mm[index_of(pore.id)] >= 0;
  };
  const RunGrid grid = neighbour_grid(found, geometry, counts);
  std::vector<double> shift(found.pores.size());
  double widest = 0;
  for (const Pore& pore : found.pores) {
    const double label_mm3 = static_cast<double>(pore.voxels) * geometry.voxel_volume_mm3();
    shift[index_of(pore.id)] = surface_shift_of(pore, label_mm3);
    if (!counts(pore)) continue;
    widest = std::min(widest, shift[index_of(pore.id)]);
  }
  std::vector<std::vector<PoreGap>> parts(found.pores.size());
  tbb::parallel_for(std::size_t{0}, found.pores.size(), [&](std::size_t i) {
    const Pore& pore = found.pores[i];
    if (control.cancelled() || !counts(pore) || runs.of(pore.id).empty()) return;
    // Shifts below zero bring surfaces nearer than the labels' gap tells.
    const double reach = reach_mm[i] - std::min(0.0, shift[i]) - widest;
    for (const RunGrid::Nearest& n : grid.within(runs.of(pore.id), pore.id, reach)) {
      const double gap = std::max(0.0, n.gap_mm + shift[i] + shift[index_of(n.label)]);
      if (n.label > pore.id && gap <= std::min(reach_mm[i], reach_mm[index_of(n.label)])) {
        parts[i].push_back({pore.id, n.label, gap});
      }
    }
  });
  control.throw_if_cancelled();
  std::vector<PoreGap> all;
  for (const auto& part : parts) all.insert(all.end(), part.begin(), part.end());
  return all;
}

}  // namespace halfmark
