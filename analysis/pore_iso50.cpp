#include "analysis/pore_iso50.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>
#include <span>

#include "analysis/mask_morphology.h"
#include "analysis/pore_runs.h"
#include "analysis/threshold_mask.h"
#include "analysis/voxel_rows.h"

namespace halfmark {

namespace {

constexpr std::int64_t slab_planes = 8;

struct RunGreys {
  double sum = 0, least = std::numeric_limits<double>::infinity();
};

// What a component's runs tell, added up in the order of the runs.
struct Facts {
  std::int64_t voxels = 0, surface_voxels = 0;
  std::array<std::int64_t, 3> index_sum{};  // of twice the voxel indices
  std::array<std::int32_t, 3> min_index{}, max_index{};
  double grey_sum = 0, least_grey = std::numeric_limits<double>::infinity();
  bool open = false, cut = false;
};

// The runs of a row that overlap [begin, end).
std::span<const Run> overlapping(std::span<const Run> row, std::int32_t begin, std::int32_t end) {
  const auto first =
      std::partition_point(row.begin(), row.end(), [&](const Run& r) { return r.end <= begin; });
  const auto last = std::partition_point(first, row.end(), [&](const Run& r) { return r.begin < end; });
  return {first, last};
}

// Voxels of [begin, end) that the row's runs cover.
std::int64_t covered(std::span<const Run> row, std::int32_t begin, std::int32_t end) {
  std::int64_t n = 0;
  for (const Run& r : overlapping(row, begin, end)) n += std::min(r.end, end) - std::max(r.begin, begin);
  return n;
}

bool covers(std::span<const Run> row, std::int32_t begin, std::int32_t end) {
  return covered(row, begin, end) == end - begin;
}

// True if a voxel of the run has a face neighbour outside the field of view.
bool at_field_border(const RunMask& field, const LabelRun& run, std::int64_t y, std::int64_t z) {
  const auto& size = field.size();
  if (!covers(field.row(y, z), run.begin - 1, run.end + 1)) return true;
  if (y == 0 || z == 0 || y + 1 == size[1] || z + 1 == size[2]) return true;
  return !covers(field.row(y - 1, z), run.begin, run.end) ||
         !covers(field.row(y + 1, z), run.begin, run.end) ||
         !covers(field.row(y, z - 1), run.begin, run.end) || !covers(field.row(y, z + 1), run.begin, run.end);
}

// Voxels of the run with a face neighbour that is no air: at most what the four neighbouring rows leave open.
std::int64_t surface_voxels(const RunMask& air, const LabelRun& run, std::int64_t y, std::int64_t z) {
  const std::int32_t length = run.end - run.begin;
  std::int64_t bare = std::min(length, 2);
  const auto add = [&](std::int64_t ny, std::int64_t nz) {
    const bool inside = ny >= 0 && nz >= 0 && ny < air.size()[1] && nz < air.size()[2];
    bare += length - (inside ? covered(air.row(ny, nz), run.begin, run.end) : length);
  };
  add(y - 1, z);
  add(y + 1, z);
  add(y, z - 1);
  add(y, z + 1);
  return std::min<std::int64_t>(bare, length);
}

std::vector<RunGreys> run_greys(const VolumeSource& source, const RunLabels& labels,
                                const RunControl& control) {
  const auto& size = source.geometry().size;
  std::vector<RunGreys> greys(labels.runs().size());
  const std::int64_t slabs = (size[2] + slab_planes - 1) / slab_planes;
  tbb::parallel_for(std::int64_t{0}, slabs, [&](std::int64_t slab) {
    if (control.cancelled()) return;
    const std::int64_t begin = slab * slab_planes, end = std::min(begin + slab_planes, size[2]);
    visit_voxel_type(source.voxel_type(), [&](auto* type) {
      using T = std::remove_pointer_t<decltype(type)>;
      SlabReader reader(source);
      const T* voxels = reader.planes<T>(begin, end);
      for (std::int64_t z = begin; z < end; ++z) {
        for (std::int64_t y = 0; y < size[1]; ++y, voxels += size[0]) {
          std::size_t i = labels.row_begin(y, z);
          for (const LabelRun& run : labels.row(y, z)) {
            RunGreys& g = greys[i++];
            for (std::int32_t x = run.begin; x < run.end; ++x) {
              const double v = static_cast<double>(voxels[x]);
              g.sum += v;
              g.least = std::min(g.least, v);
            }
          }
        }
      }
    });
  });
  control.throw_if_cancelled();
  return greys;
}

// By label - 1.
std::vector<Facts> gather_facts(const Components& components, const std::vector<RunGreys>& greys,
                                const RunMask& air, const FieldOfView& field, const PartMap& part) {
  std::vector<Facts> facts(static_cast<std::size_t>(components.count));
  const auto& size = air.size();
  const bool knows_open = part.has_outside && !part.open_air.empty();
  std::size_t i = 0;
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (const LabelRun& run : components.labels.row(y, z)) {
        Facts& f = facts[static_cast<std::size_t>(run.label) - 1];
        const std::array<std::int32_t, 3> low{run.begin, static_cast<std::int32_t>(y),
                                              static_cast<std::int32_t>(z)};
        const std::array<std::int32_t, 3> high{run.end - 1, low[1], low[2]};
        const std::int64_t n = run.end - run.begin;
        for (std::size_t k = 0; k < 3; ++k) {
          f.min_index[k] = f.voxels == 0 ? low[k] : std::min(f.min_index[k], low[k]);
          f.max_index[k] = f.voxels == 0 ? high[k] : std::max(f.max_index[k], high[k]);
          f.index_sum[k] += n * (low[k] + high[k]);
        }
        f.voxels += n;
        f.surface_voxels += surface_voxels(air, run, y, z);
        f.grey_sum += greys[i].sum;
        f.least_grey = std::min(f.least_grey, greys[i].least);
        f.open = f.open || (knows_open && !overlapping(part.open_air.row(y, z), run.begin, run.end).empty());
        f.cut = f.cut || at_field_border(field.rows, run, y, z);
        ++i;
      }
    }
  }
  return facts;
}

Measured volume_of(const Facts& f, const VolumeGeometry& geometry, const GreyLevels& levels) {
  const double voxel_mm3 = geometry.voxel_volume_mm3();
  const double voxels = static_cast<double>(f.voxels), surface = static_cast<double>(f.surface_voxels);
  const double sigma = std::sqrt(levels.blur_voxel * levels.blur_voxel + 1.0 / 12);
  // Voxels that a plane Gaussian edge moves by for one grey value at its half height.
  const double voxel_per_grey = sigma * std::sqrt(2 * std::numbers::pi) / levels.contrast();
  const double radius = std::cbrt(3 * voxels / (4 * std::numbers::pi));
  Measured m;
  m.value = voxels * voxel_mm3;
  m.contributions = {
      {"threshold", surface * levels.threshold_standard_uncertainty * voxel_per_grey * voxel_mm3},
      {"noise", std::sqrt(surface) * levels.material_noise * voxel_per_grey * voxel_mm3},
      // A surface voxel's own cut is spread evenly over one voxel.
      {"digitisation", std::sqrt(surface / 12) * voxel_mm3},
      {"blur", std::min(1.0, 3 * sigma * sigma / (radius * radius)) * m.value}};
  double variance = 0;
  for (const Contribution& c : m.contributions) variance += c.standard_uncertainty * c.standard_uncertainty;
  m.standard_uncertainty = std::sqrt(variance);
  return m;
}

Pore pore_of(const Facts& f, std::int32_t id, const VolumeGeometry& geometry, const GreyLevels& levels) {
  Pore pore;
  pore.id = id;
  pore.open = f.open;
  pore.cut_by_field = f.cut;
  pore.kind = f.open ? PoreKind::open : f.cut ? PoreKind::cut_by_field : PoreKind::closed;
  const double n = static_cast<double>(f.voxels);
  Vec3 centre;
  for (std::size_t k = 0; k < 3; ++k) centre[k] = static_cast<double>(f.index_sum[k]) / (2 * n);
  pore.centre_mm = geometry.index_to_mm(centre);
  pore.volume_mm3 = volume_of(f, geometry, levels);
  pore.equivalent_diameter_mm = std::cbrt(6 * pore.volume_mm3.value / std::numbers::pi);
  pore.diameter_standard_uncertainty_mm =
      pore.equivalent_diameter_mm * pore.volume_mm3.standard_uncertainty / (3 * pore.volume_mm3.value);
  pore.mean_grey = f.grey_sum / n;
  pore.contrast = (levels.material - f.least_grey) / levels.contrast();
  pore.voxels = f.voxels;
  pore.min_index = f.min_index;
  pore.max_index = f.max_index;
  return pore;
}

// Component numbers of the pores kept, largest first.
std::vector<std::int32_t> kept_by_size(const std::vector<Facts>& facts, std::int64_t min_voxels) {
  std::vector<std::int32_t> order;
  for (std::size_t i = 0; i < facts.size(); ++i) {
    if (facts[i].voxels >= min_voxels) order.push_back(static_cast<std::int32_t>(i) + 1);
  }
  std::stable_sort(order.begin(), order.end(), [&](std::int32_t a, std::int32_t b) {
    return facts[static_cast<std::size_t>(a) - 1].voxels > facts[static_cast<std::size_t>(b) - 1].voxels;
  });
  return order;
}

PoreField field_of(const RunLabels& labels, const std::vector<std::int32_t>& id_of_label) {
  PoreField field;
  const auto& size = labels.size();
  field.labels = RunLabels(size);
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (LabelRun run : labels.row(y, z)) {
        run.label = id_of_label[static_cast<std::size_t>(run.label)];
        if (run.label > 0) field.labels.add_run(run);
      }
      field.labels.end_row();
    }
  }
  field.windows = field.labels;
  field.fraction.assign(static_cast<std::size_t>(field.labels.voxel_count()), PoreField::unit);
  return field;
}

}  // namespace

SegmentedPores segment_pores_iso50(const VolumeSource& source, const FieldOfView& field,
                                   const GreyLevels& levels, const PartMap& part, const PoreSpec& options,
                                   const RunControl& control) {
  control.step("pores", 0);
  const RunMask& searched = part.has_outside ? part.inside : field.rows;
  const RunMask air = difference(searched, voxels_at_or_above(source, field, levels.threshold, control));
  control.step("pores", 0.4);
  const Components components = connected_components(air, 26);
  control.step("pores", 0.6);
  const std::vector<RunGreys> greys = run_greys(source, components.labels, control);
  const std::vector<Facts> facts = gather_facts(components, greys, air, field, part);
  control.step("pores", 0.9);

  SegmentedPores found;
  std::vector<std::int32_t> id_of_label(facts.size() + 1, 0);
  for (const std::int32_t label : kept_by_size(facts, options.min_voxels)) {
    const std::int32_t id = static_cast<std::int32_t>(found.pores.size()) + 1;
    id_of_label[static_cast<std::size_t>(label)] = id;
    found.pores.push_back(pore_of(facts[static_cast<std::size_t>(label) - 1], id, source.geometry(), levels));
  }
  found.field = field_of(components.labels, id_of_label);
  found.smoothed_noise = levels.material_noise / levels.contrast();
  found.seed_threshold = 0.5;
  found.void_grey = levels.air;
  control.step("pores", 1);
  return found;
}

}  // namespace halfmark
