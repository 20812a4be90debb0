// The part itself in a zone: walls, material volume, surface.
#include <cmath>
#include <numbers>

#include "analysis/requirement_context.h"
#include "analysis/surface.h"

namespace halfmark {

namespace {

std::vector<std::uint8_t> vertices_in_zone(const RequirementContext& c, const TriangleMesh& mesh) {
  std::vector<std::uint8_t> in_zone;
  if (c.zones.spec(c.zone).shape == ZoneShape::everything) return in_zone;
  in_zone.reserve(mesh.vertices_mm.size());
  for (const auto& v : mesh.vertices_mm) {
    const Vec3 mm{v[0], v[1], v[2]};
    in_zone.push_back(c.zones.contains(c.zone, mm) && !c.zones.left_out(mm));
  }
  return in_zone;
}

double shift_mm(const RequirementContext& c) {
  // A shift of the threshold by its uncertainty moves a Gaussian edge by u / slope.
  const double blur = std::hypot(c.measured.levels.blur_mm, c.voxel_mm() / std::sqrt(12.0));
  return c.measured.levels.threshold_standard_uncertainty / c.measured.levels.contrast() * blur *
         std::sqrt(2 * std::numbers::pi);
}

}  // namespace

void measure_wall(RequirementContext& c) {
  if (c.measured.walls == nullptr || c.measured.outer_surface == nullptr)
    return c.none("walls were not measured", false);
  const auto in_zone = vertices_in_zone(c, *c.measured.outer_surface);
  const WallSummary summary = summarise_walls(*c.measured.outer_surface, *c.measured.walls, c.spec.walls,
                                              in_zone, c.requirement.min.value_or(0), 1);
  if (!summary.any_wall)
    return c.none(
        "no wall was found in the zone (a place whose sphere touches two sides at least 120° apart)", false);
  if (c.requirement.percentile) {
    c.set(wall_percentile(*c.measured.outer_surface, *c.measured.walls, in_zone, *c.requirement.percentile),
          {{"wall", c.measured.walls->standard_uncertainty_mm}});
    c.result.evidence.what = number_text("wall, %.4g %% percentile", *c.requirement.percentile);
  } else {
    c.set(summary.least_mm.value, {{"wall", summary.least_mm.standard_uncertainty}});
    c.result.evidence.what = "thinnest wall";
  }
  if (!summary.spots.empty()) {
    c.result.evidence.position_mm = summary.spots.front().position_mm;
    c.result.evidence.extent_mm = summary.spots.front().patch_mean_mm;
  }
  if (c.result.measured.value >= c.spec.walls.max_mm) {
    c.result.lower_bound = true;
    c.result.warnings.push_back(number_text(
        "walls are measured up to %.4g mm: this one is that thick or thicker", c.spec.walls.max_mm));
  }
}

void measure_material_volume(RequirementContext& c) {
  const bool all = c.zones.spec(c.zone).shape == ZoneShape::everything && c.measured.surface != nullptr;
  const ZoneSums sums = c.zone_sums();
  if (sums.part_voxels == 0) return c.none("the zone holds no part", false);
  const double voxel = c.measured.geometry.voxel_volume_mm3();
  double value = (static_cast<double>(sums.part_voxels) - c.total(sums, false).voxels) * voxel;
  if (all) value = enclosed_volume_mm3(*c.measured.surface);
  const double area = c.measured.surface != nullptr ? surface_area_mm2(*c.measured.surface) : 0;
  c.set(value, {{"threshold", area * shift_mm(c)},
                {"voxel count", all ? 0 : std::sqrt(area / (c.voxel_mm() * c.voxel_mm()) / 12) * voxel}});
  c.result.evidence.what = "material volume";
}

void measure_surface_area(RequirementContext& c) {
  if (c.measured.surface == nullptr) return c.none("the surface was not extracted", false);
  double area = 0;
  const bool all = c.zones.spec(c.zone).shape == ZoneShape::everything;
  for (const auto& t : c.measured.surface->triangles) {
    Vec3 p[3];
    for (std::size_t i = 0; i < 3; ++i)
      p[i] = {c.measured.surface->vertices_mm[t[i]][0], c.measured.surface->vertices_mm[t[i]][1],
              c.measured.surface->vertices_mm[t[i]][2]};
    const Vec3 middle = (1.0 / 3) * (p[0] + p[1] + p[2]);
    if (!all && (!c.zones.contains(c.zone, middle) || c.zones.left_out(middle))) continue;
    area += 0.5 * length(cross(p[1] - p[0], p[2] - p[0]));
  }
  // Noise roughens a triangulated surface: a first estimate of two percent.
  c.set(area, {{"roughness of the triangulation", 0.02 * area}});
  c.result.evidence.what = "surface area";
}

}  // namespace halfmark
