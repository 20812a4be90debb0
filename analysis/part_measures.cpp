// The part itself in a zone: walls, material volume, surface.
#include <algorithm>
#include <cmath>
#include <numbers>

#include "analysis/requirement_context.h"
#include "analysis/surface.h"

namespace halfmark {

namespace {

// Noise roughens a triangulated surface: a first estimate.
constexpr double triangulation_roughness = 0.02;

std::vector<std::uint8_t> vertices_in_zone(const RequirementContext& c, const TriangleMesh& mesh) {
  std::vector<std::uint8_t> in_zone;
  if (c.whole_part()) return in_zone;
  in_zone.reserve(mesh.vertices_mm.size());
  for (const auto& v : mesh.vertices_mm) {
    const Vec3 mm{v[0], v[1], v[2]};
    in_zone.push_back(c.zones.contains(c.zone, mm) && !c.zones.left_out(mm));
  }
  return in_zone;
}

// Triangles count by their middles.
double area_in_zone(const RequirementContext& c, const TriangleMesh& mesh) {
  if (c.whole_part()) return surface_area_mm2(mesh);
  double area = 0;
  for (const auto& t : mesh.triangles) {
    Vec3 p[3];
    for (std::size_t i = 0; i < 3; ++i) {
      const auto& v = mesh.vertices_mm[t[i]];
      p[i] = {v[0], v[1], v[2]};
    }
    const Vec3 middle = (1.0 / 3) * (p[0] + p[1] + p[2]);
    if (c.zones.contains(c.zone, middle) && !c.zones.left_out(middle))
      area += 0.5 * length(cross(p[1] - p[0], p[2] - p[0]));
  }
  return area;
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
    c.result.evidence.what = sentence("wall, %.4g %% percentile", *c.requirement.percentile);
  } else {
    c.set(summary.least_mm.value, {{"wall", summary.least_mm.standard_uncertainty}});
    c.result.evidence.what = "thinnest wall";
  }
  c.result.evidence.position_mm = summary.least_position_mm;
  c.result.evidence.extent_mm = summary.least_mm.value;
  if (c.result.measured.value >= c.spec.walls.max_mm) {
    c.result.lower_bound = true;
    c.result.warnings.push_back(
        sentence("walls are measured up to %.4g mm: this one is that thick or thicker", c.spec.walls.max_mm));
  }
}

void measure_material_volume(RequirementContext& c) {
  const ZoneSums sums = c.zone_sums();
  const double voxel = c.measured.geometry.voxel_volume_mm3(), face = c.voxel_mm() * c.voxel_mm();
  // Every void takes material away, also those that do not count as pores.
  double voids = 0;
  for (const Pore& p : c.measured.pores.pores) {
    if (is_void(p)) voids += static_cast<double>(sums.pore[static_cast<std::size_t>(p.id)]) / PoreField::unit;
  }
  double value = (static_cast<double>(sums.part_voxels) - voids) * voxel, count = 0;
  const double area = c.measured.surface != nullptr ? area_in_zone(c, *c.measured.surface) : 0;
  if (c.whole_part() && c.measured.surface != nullptr) {
    value = enclosed_volume_mm3(*c.measured.surface);
  } else {
    // Each voxel that the part's surface or the zone's (taken as a cube's of the same volume) cuts is counted
    // or not: an error of 1 / sqrt(12) voxel apiece.
    const double cut = 6 * std::pow(std::max(value, 0.0), 2.0 / 3);
    count = std::sqrt((area + cut) / face / 12) * voxel;
  }
  c.set(value, {{"threshold", area * shift_mm(c)}, {"voxel count", count}});
  c.result.evidence.what = "material volume";
}

void measure_surface_area(RequirementContext& c) {
  if (c.measured.surface == nullptr) return c.none("the surface was not extracted", false);
  const double area = area_in_zone(c, *c.measured.surface);
  c.set(area, {{"roughness of the triangulation", triangulation_roughness * area}});
  c.result.evidence.what = "surface area";
}

}  // namespace halfmark
