// A small inspected part with known pores for tests of what comes after the inspection: a plate with a hole,
// three gas pores of known place and size, one of them over its limit.
#pragma once

#include <cmath>
#include <numbers>

#include "analysis/blurred_body.h"
#include "analysis/inspection.h"
#include "analysis/surface.h"

namespace halfmark::sample {

inline VolumeGeometry geometry() {
  VolumeGeometry g;
  g.size = {96, 80, 56};
  g.spacing_mm = {0.1, 0.1, 0.1};
  g.origin_mm = {-1, 0, 2};
  return g;
}

struct Ball {
  Vec3 centre_mm;
  double radius_mm;
  Verdict verdict;
};

inline std::vector<Ball> balls() {
  return {{{2.0, 4.0, 4.5}, 0.6, Verdict::reject},
          {{5.0, 2.5, 4.8}, 0.35, Verdict::undecided},
          {{6.4, 5.6, 4.2}, 0.25, Verdict::accept}};
}

inline MemoryVolume volume() {
  std::vector<SolidPtr> removed{cylinder({5.5, 4.2, 0}, {5.5, 4.2, 9}, 0.7)};
  for (const Ball& ball : balls()) removed.push_back(sphere(ball.centre_mm, ball.radius_mm));
  ScanModel scan;
  scan.noise_grey = 1500;
  return render_scan({{subtracted(box({0, 1, 3}, {7.5, 7, 6.5}), removed), 1}}, geometry(), scan);
}

inline RunLabels labels_of(const std::vector<Ball>& all, const VolumeGeometry& g) {
  RunLabels labels(g.size);
  for (std::int64_t z = 0; z < g.size[2]; ++z) {
    for (std::int64_t y = 0; y < g.size[1]; ++y) {
      for (std::int64_t x = 0; x < g.size[0]; ++x) {
        const Vec3 p = g.index_to_mm({double(x), double(y), double(z)});
        for (std::size_t i = 0; i < all.size(); ++i) {
          if (length(p - all[i].centre_mm) > all[i].radius_mm) continue;
          labels.add_run({std::int32_t(x), std::int32_t(x + 1), std::int32_t(i + 1)});
          break;
        }
      }
      labels.end_row();
    }
  }
  return labels;
}

inline Pore pore_of(const Ball& ball, std::int32_t id, const VolumeGeometry& g) {
  Pore p;
  p.id = id;
  p.shape = ShapeClass::round;
  p.centre_mm = ball.centre_mm;
  p.volume_mm3 = {4 * std::numbers::pi / 3 * std::pow(ball.radius_mm, 3), 0.004, {}};
  p.equivalent_diameter_mm = p.length_mm = p.width_mm = p.thickness_mm = 2 * ball.radius_mm;
  p.diameter_standard_uncertainty_mm = 0.01;
  p.surface_area_mm2 = 4 * std::numbers::pi * ball.radius_mm * ball.radius_mm;
  p.sphericity = id == 3 ? not_measured : 0.98;
  p.depth_mm = 0.8;
  p.mean_grey = 9000.5;
  p.contrast = 1;
  p.zones = {"part", "left"};
  p.verdict = ball.verdict;
  for (std::size_t a = 0; a < 3; ++a) {
    const double c = (ball.centre_mm[a] - g.origin_mm[a]) / g.spacing_mm[a],
                 r = ball.radius_mm / g.spacing_mm[a];
    p.min_index[a] = static_cast<std::int32_t>(std::ceil(c - r));
    p.max_index[a] = static_cast<std::int32_t>(std::floor(c + r));
  }
  p.voxels = std::llround(p.volume_mm3.value / g.voxel_volume_mm3());
  return p;
}

inline RequirementResult requirement(const std::string& id, Quantity quantity, double max, double value,
                                     double u, Verdict verdict) {
  RequirementResult r;
  r.requirement.id = id;
  r.requirement.zone = "part";
  r.requirement.quantity = quantity;
  r.requirement.max = max;
  r.unit = quantity == Quantity::porosity ? "%" : quantity == Quantity::pore_count ? "" : "mm";
  r.has_value = true;
  r.measured = {value, u, {{"noise", 0.8 * u}, {"threshold", 0.6 * u}}};
  r.expanded_uncertainty = 2 * u;
  r.verdict = verdict;
  r.reason = "the value and its uncertainty stand against the limit";
  return r;
}

inline InspectionSpec spec() {
  InspectionSpec s;
  s.title = "Plate release";
  s.part = {"plate", "P-77", "A", "Al", "order 4"};
  s.zones.push_back({"part", ZoneShape::everything, ZoneUse::inspect, {}, {}, {}, {}, {}, 0, 0, 0, {}, {}});
  s.sha256 = std::string(64, 'b');
  s.file = "plate.spec.json";
  return s;
}

// Everything but the walls; volume is what it was measured on.
inline InspectionRun run(const VolumeSource& source) {
  const VolumeGeometry& g = source.geometry();
  InspectionRun run;
  Inspection& in = run.inspection;
  in.verdict = Verdict::reject;
  in.serial = "SN-0042";
  in.volume.file = "plate.mha";
  in.volume.format = "MetaImage";
  in.volume.sha256 = std::string(64, 'a');
  in.volume.voxel_type = "u16";
  in.volume.geometry = g;
  in.volume.scan = {{"voltage_kv", "200"}};
  in.spec = spec();
  GreyLevels& levels = in.grey_levels;
  levels.air = 8000;
  levels.material = 40000;
  levels.threshold = 24000;
  levels.air_noise = levels.material_noise = 1500;
  levels.contrast_to_noise = 32000.0 / 1500;
  levels.blur_voxel = 0.8;
  levels.blur_mm = 0.08;
  levels.blur_measured = true;
  run.field = whole_field(g);
  run.part = find_part(source, run.field, levels, {0.2, 0.1, 0});
  run.surface = extract_surface(source, run.field, levels, run.part);
  run.found.field.labels = labels_of(balls(), g);
  for (std::size_t i = 0; i < balls().size(); ++i)
    in.pores.push_back(pore_of(balls()[i], static_cast<std::int32_t>(i + 1), g));
  run.found.pores = in.pores;
  in.bodies = run.part.bodies;
  in.part_volume_mm3 = {150, 0.4, {}};
  in.surface_area_mm2 = 200;
  in.part_min_mm = {0, 1, 3};
  in.part_max_mm = {7.5, 7, 6.5};
  in.pore_summary.count = in.pore_summary.closed = 3;
  in.pore_summary.volume_mm3 = {1.15, 0.01, {}};
  in.pore_summary.porosity_percent = {0.76, 0.01, {{"noise", 0.01}}};
  in.pore_summary.smallest_expected_diameter_mm = 0.22;
  in.requirements.push_back(requirement("R1", Quantity::pore_diameter, 0.8, 1.2, 0.01, Verdict::reject));
  in.requirements.back().evidence = {1, balls()[0].centre_mm, 1.2, "pore 1"};
  in.requirements.push_back(requirement("R2", Quantity::porosity, 0.76, 0.76, 0.01, Verdict::undecided));
  in.requirements.back().evidence = {2, balls()[1].centre_mm, 0.7, "pore 2"};
  in.requirements.back().warnings = {"the limit lies close to what this scan can show"};
  in.requirements.push_back(requirement("R3", Quantity::pore_count, 10, 3, 0, Verdict::accept));
  for (const RequirementResult& r : in.requirements) in.spec.requirements.push_back(r.requirement);
  in.settings = {{"pores.method", "local"}, {"pores.min_voxels", "8"}};
  in.not_searched = {"Voids thinner than one voxel (0.1 mm) cannot be seen."};
  in.warnings = {"the part is small"};
  return run;
}

}  // namespace halfmark::sample
