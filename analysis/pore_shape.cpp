#include "analysis/pore_shape.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <numbers>
#include <span>

#include "analysis/calipers.h"
#include "analysis/crofton_area.h"
#include "analysis/pore_mouths.h"
#include "analysis/pore_outline.h"
#include "analysis/pore_spacing.h"
#include "analysis/pore_uncertainty.h"
#include "analysis/shape_class.h"

namespace halfmark {

namespace {

// Pore volume over label volume is trusted within these bounds; a void of 2 voxels under a blur of 1 voxel
// has 0.15. Beyond them the label or the volume is spoilt by noise or a neighbour.
constexpr double least_volume_ratio = 0.02, most_volume_ratio = 8;
// Exponent of Thomsen's approximation for an ellipsoid's surface (2004, within 1.1 %).
constexpr double thomsen_exponent = 1.6075;

// h with (a + h)(b + h)(c + h) = ratio * abc, by bisection; the smallest of a, b, c stays positive.
double growth_for_volume(double a, double b, double c, double ratio) {
  const double target = ratio * a * b * c;
  double low = -std::min({a, b, c}), high = std::max(1.0, ratio) * std::max({a, b, c});
  for (int i = 0; i < 60; ++i) {
    const double h = (low + high) / 2;
    ((a + h) * (b + h) * (c + h) < target ? low : high) = h;
  }
  return (low + high) / 2;
}

double trusted_ratio(double volume, double label_volume) {
  if (!(volume > 0) || !(label_volume > 0)) return 1;
  return std::clamp(volume / label_volume, least_volume_ratio, most_volume_ratio);
}

bool has_surface_of_its_own(PoreKind kind) {
  return kind != PoreKind::diffuse && kind != PoreKind::in_between;
}

double ellipsoid_surface(double a, double b, double c) {  // but for a constant factor
  const double p = thomsen_exponent;
  return std::pow(std::pow(a * b, p) + std::pow(a * c, p) + std::pow(b * c, p), 1 / p);
}

// The shares of the field's windows, pore by pore.
class WindowShares {
 public:
  WindowShares(const PoreField& field, std::size_t pores) : start_(pores + 1, 0) {
    const auto listed = [&](const LabelRun& r) {
      return r.label >= 1 && static_cast<std::size_t>(r.label) <= pores;
    };
    for (const LabelRun& r : field.windows.runs()) {
      if (listed(r)) ++start_[static_cast<std::size_t>(r.label)];
    }
    for (std::size_t i = 1; i < start_.size(); ++i) start_[i] += start_[i - 1];
    runs_.resize(start_.back());
    std::vector<std::size_t> next(start_.begin(), start_.end() - 1);
    const std::int16_t* share = field.fraction.data();
    const auto& size = field.windows.size();
    for (std::int64_t z = 0; z < size[2]; ++z) {
      for (std::int64_t y = 0; y < size[1]; ++y) {
        for (const LabelRun& r : field.windows.row(y, z)) {
          if (listed(r)) {
            const VoxelRun voxels{r.begin, r.end, static_cast<std::int32_t>(y), static_cast<std::int32_t>(z)};
            runs_[next[static_cast<std::size_t>(r.label) - 1]++] = {voxels, share};
          }
          share += r.end - r.begin;
        }
      }
    }
  }

  std::span<const ShareRun> of(std::size_t pore) const {
    return {runs_.data() + start_[pore], start_[pore + 1] - start_[pore]};
  }

 private:
  std::vector<std::size_t> start_;
  std::vector<ShareRun> runs_;
};

class Description {
 public:
  Description(const VolumeGeometry& geometry, const GreyLevels& levels)
      : spacing_(geometry.spacing_mm),
        voxel_mm3_(geometry.voxel_volume_mm3()),
        directions_(crofton_directions(geometry.spacing_mm)),
        blur_mm_(std::sqrt(levels.blur_voxel * levels.blur_voxel + 1.0 / 12) * geometry.voxel_mm()) {}

  // Returns the surface shift, mm.
  double describe(Pore& pore, std::span<const VoxelRun> label, std::span<const ShareRun> shares) const {
    if (pore.kind == PoreKind::diffuse) shares = {};
    const std::vector<Vec3> outline = outline_points(label, shares, spacing_);
    const Calipers raw = measure_calipers(outline);
    const double label_mm3 = static_cast<double>(voxel_count(label)) * voxel_mm3_;
    const double ratio =
        has_surface_of_its_own(pore.kind) ? trusted_ratio(pore.volume_mm3.value, label_mm3) : 1;
    const double growth = growth_for_volume(raw.length, raw.width, raw.thickness, ratio);
    Calipers calipers = raw;
    calipers.length += growth;
    calipers.width += growth;
    calipers.thickness += growth;
    pore.length_mm = calipers.length;
    pore.width_mm = calipers.width;
    pore.thickness_mm = calipers.thickness;
    set_area(pore, label, label_mm3 * ratio, raw, calipers);
    widen_edge_term(pore);
    return -growth / 2;
  }

 private:
  void set_area(Pore& pore, std::span<const VoxelRun> label, double volume_mm3, const Calipers& raw,
                const Calipers& calipers) const {
    pore.surface_area_mm2 = pore.sphericity = not_measured;
    pore.shape = ShapeClass::unclassified;
    if (pore.kind == PoreKind::diffuse || voxel_count(label) < least_area_voxels) return;
    const double shrunk = ellipsoid_surface(calipers.length, calipers.width, calipers.thickness) /
                          ellipsoid_surface(raw.length, raw.width, raw.thickness);
    pore.surface_area_mm2 = shrunk * crofton_area_mm2(label, directions_, voxel_mm3_);
    // Crofton's area may fall short of a sphere's by its few per cent; no body is rounder than a sphere.
    pore.sphericity = std::min(1.0, wadell_sphericity(volume_mm3, pore.surface_area_mm2));
    pore.shape =
        shape_class(calipers, pore.sphericity, std::cbrt(6 * volume_mm3 / std::numbers::pi), blur_mm_);
  }

  // The edge's share of the volume's uncertainty is first stated for a sphere; other shapes have more
  // surface.
  static void widen_edge_term(Pore& pore) {
    const double sphere = sphere_area(pore.volume_mm3.value);
    if (std::isnan(pore.surface_area_mm2) || !(pore.surface_area_mm2 > sphere)) return;
    for (const Contribution& c : pore.volume_mm3.contributions) {
      if (c.name != "edge position") continue;
      return set_volume_term(pore, std::string(c.name),
                             c.standard_uncertainty * pore.surface_area_mm2 / sphere);
    }
  }

  Vec3 spacing_;
  double voxel_mm3_;
  std::array<CroftonDirection, 13> directions_;
  double blur_mm_;
};

}  // namespace

void describe_pores(SegmentedPores& found, const VolumeGeometry& geometry, const PartMap& part,
                    const GreyLevels& levels, const RunControl& control) {
  control.step("pore shapes", 0);
  const PoreRuns labels(found.field.labels, static_cast<std::int32_t>(found.pores.size()));
  const WindowShares shares(found.field, found.pores.size());
  const Description description(geometry, levels);
  std::vector<double> shift(found.pores.size(), 0);
  tbb::parallel_for(std::size_t{0}, found.pores.size(), [&](std::size_t i) {
    const auto label = labels.of(static_cast<std::int32_t>(i) + 1);
    if (control.cancelled() || label.empty()) return;
    shift[i] = description.describe(found.pores[i], label, shares.of(i));
  });
  const std::vector<PoreMouth> mouths = pore_mouths(found, geometry, part);
  const double edge_mm = edge_width_voxel(levels) * geometry.voxel_mm();
  for (std::size_t i = 0; i < mouths.size(); ++i) {
    if (found.pores[i].open)
      set_volume_term(found.pores[i], "mouth",
                      mouth_uncertainty_mm3(mouths[i], part.closing_radius_mm, edge_mm));
  }
  control.step("pore shapes", 0.5);
  measure_depth(found, geometry, part, shift, control);
  measure_spacing(found, geometry, shift, control);
  control.step("pore shapes", 1);
}

double surface_shift_of(const Pore& pore, double label_volume_mm3) {
  if (!has_surface_of_its_own(pore.kind)) return 0;
  const double ratio = trusted_ratio(pore.volume_mm3.value, label_volume_mm3);
  return growth_for_volume(pore.length_mm, pore.width_mm, pore.thickness_mm, 1 / ratio) / 2;
}

double wadell_sphericity(double volume, double area) {
  return std::cbrt(std::numbers::pi) * std::cbrt(36 * volume * volume) / area;
}

}  // namespace halfmark
