#include "demo_volumes/part_builder.h"

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <numbers>

#include "demo_volumes/solid_integral.h"

namespace halfmark {

namespace {

constexpr double voxel_mm = 0.1;
// Cavities are integrated in cells of this share of their extent, bodies of this share of theirs.
constexpr double cavity_leaf_share = 1.0 / 64, body_leaf_share = 1.0 / 128;

double widest(const SolidBounds& b) {
  const Vec3 size = b.max_mm - b.min_mm;
  return std::max({size[0], size[1], size[2]});
}

// Rounded to 1e-6: more digits than the truth is sure of, and the same on every machine.
double tidy(double value) { return std::round(value * 1e6) / 1e6; }
Json tidy(const Vec3& p) { return Json::array({tidy(p[0]), tidy(p[1]), tidy(p[2])}); }

double equivalent_diameter(double volume) { return std::cbrt(6 * volume / std::numbers::pi); }

}  // namespace

VolumeGeometry demo_geometry(const Vec3& size_mm, int scale) {
  VolumeGeometry geometry;
  const double voxel = voxel_mm / scale;
  geometry.spacing_mm = {voxel, voxel, voxel};
  geometry.origin_mm = {0.5 * voxel, 0.5 * voxel, 0.5 * voxel};
  for (std::size_t a = 0; a < 3; ++a) geometry.size[a] = std::llround(size_mm[a] / voxel);
  return geometry;
}

PartBuilder::PartBuilder(std::string name, const VolumeGeometry& geometry, const Vec3& turn_axis,
                         double turn_degrees)
    : turn_(rotation_about(turn_axis, turn_degrees)) {
  part_.name = std::move(name);
  part_.sentence = demo_sentence(part_.name);
  part_.geometry = geometry;
  for (std::size_t a = 0; a < 3; ++a)
    middle_[a] = 0.5 * static_cast<double>(geometry.size[a]) * geometry.spacing_mm[a];
}

SolidPtr PartBuilder::placed(const SolidPtr& solid) const { return moved(solid, turn_, middle_, {0, 0, 0}); }

Vec3 PartBuilder::placed(const Vec3& mm) const {
  const Vec3 q = mm - middle_;
  return middle_ + Vec3{turn_[0] * q[0] + turn_[1] * q[1] + turn_[2] * q[2],
                        turn_[3] * q[0] + turn_[4] * q[1] + turn_[5] * q[2],
                        turn_[6] * q[0] + turn_[7] * q[1] + turn_[8] * q[2]};
}

void PartBuilder::body(const SolidPtr& solid) {
  body_ = solid;
  enclosed_mm3_ = integrate(*solid, body_leaf_share * widest(solid->bounds())).volume_mm3;
  part_.bodies.push_back({placed(solid), 1});
}

void PartBuilder::list_pore(const std::string& kind, const Vec3& centre_mm, double volume_mm3) {
  const double diameter = equivalent_diameter(volume_mm3);
  pore_volume_mm3_ += volume_mm3;
  if (kind == "open") open_volume_mm3_ += volume_mm3;
  largest_pore_mm_ = std::max(largest_pore_mm_, diameter);
  pores_.push_back({{"pore", pores_.size() + 1},
                    {"kind", kind},
                    {"centre_mm", tidy(placed(centre_mm))},
                    {"volume_mm3", tidy(volume_mm3)},
                    {"equivalent_diameter_mm", tidy(diameter)}});
}

void PartBuilder::gas_pore(const Vec3& centre_mm, double diameter_mm) {
  part_.bodies.push_back({sphere(placed(centre_mm), 0.5 * diameter_mm), 0});
  list_pore("gas", centre_mm, std::numbers::pi / 6 * diameter_mm * diameter_mm * diameter_mm);
}

void PartBuilder::cavity(const std::string& kind, const SolidPtr& solid) {
  part_.bodies.push_back({placed(solid), 0});
  const auto inside = integrate(*intersected({solid, body_}), cavity_leaf_share * widest(solid->bounds()));
  list_pore(kind, inside.centre_mm, inside.volume_mm3);
}

void PartBuilder::inclusion(const SolidPtr& solid, double grey_share) {
  part_.bodies.push_back({placed(solid), grey_share});
  const auto inside = integrate(*solid, cavity_leaf_share * widest(solid->bounds()));
  inclusions_.push_back({{"centre_mm", tidy(placed(inside.centre_mm))},
                         {"volume_mm3", tidy(inside.volume_mm3)},
                         {"equivalent_diameter_mm", tidy(equivalent_diameter(inside.volume_mm3))},
                         {"grey_share", grey_share}});
}

void PartBuilder::debris(const SolidPtr& solid) {
  part_.bodies.push_back({placed(solid), 1});
  const auto chip = integrate(*solid, cavity_leaf_share * widest(solid->bounds()));
  debris_.push_back({{"centre_mm", tidy(placed(chip.centre_mm))}, {"volume_mm3", tidy(chip.volume_mm3)}});
}

void PartBuilder::wall(const std::string& what, double thickness_mm, const Vec3& place_mm) {
  walls_.push_back(
      {{"wall", what}, {"thickness_mm", tidy(thickness_mm)}, {"position_mm", tidy(placed(place_mm))}});
}

void PartBuilder::expect(const std::string& id, const std::string& verdict, double value, double tolerance,
                         const std::string& unit, const std::string& reason) {
  Json entry{{"id", id}, {"verdict", verdict}, {"value", tidy(value)}, {"unit", unit}};
  if (tolerance > 0) entry["tolerance"] = tolerance;
  entry["reason"] = reason;
  requirements_.push_back(entry);
}

DemoPart PartBuilder::finish(const std::string& verdict, const Json& spec, const ScanModel& scan) {
  part_.scan = scan;
  Json truth{{"truth_version", 1}, {"name", part_.name}, {"shows", part_.sentence}, {"verdict", verdict}};
  truth["requirements"] = requirements_;
  truth["part"] = {{"material_volume_mm3", tidy(enclosed_mm3_ - pore_volume_mm3_)},
                   {"pore_volume_mm3", tidy(pore_volume_mm3_)},
                   {"porosity_percent", tidy(porosity_percent())},
                   {"open_porosity_percent", tidy(open_porosity_percent())}};
  truth["pores"] = pores_;
  truth["inclusions"] = inclusions_;
  truth["debris"] = debris_;
  truth["walls"] = walls_;
  truth["scan"] = {{"air_grey", scan.air_grey},     {"material_grey", scan.material_grey},
                   {"noise_grey", scan.noise_grey}, {"blur_voxel", scan.blur_voxel},
                   {"cupping", scan.cupping},       {"seed", scan.seed}};
  part_.truth_json = truth.dump(2) + "\n";
  part_.spec_json = spec.dump(2) + "\n";
  return std::move(part_);
}

ScanModel everyday_scan(std::uint64_t seed) {
  ScanModel scan;
  scan.air_grey = 9000;
  scan.material_grey = 42000;
  scan.blur_voxel = 0.8;
  scan.noise_grey = 2200;
  scan.noise_correlation_voxel = 0.35;
  scan.cupping = 0.07;
  scan.seed = seed;
  return scan;
}

SolidPtr below_plane(const Vec3& place_mm, const Vec3& normal, double reach_mm) {
  const Vec3 up{0, 0, 1}, n = (1 / length(normal)) * normal;
  const SolidPtr block =
      box(place_mm - Vec3{reach_mm, reach_mm, 2 * reach_mm}, place_mm + Vec3{reach_mm, reach_mm, 0});
  const Vec3 axis = cross(up, n);
  if (length(axis) < 1e-12) return block;
  const double degrees = std::acos(std::clamp(n[2], -1.0, 1.0)) * 180 / std::numbers::pi;
  return moved(block, rotation_about(axis, degrees), place_mm, {0, 0, 0});
}

SolidPtr shrinkage_cavity(const Vec3& centre_mm, const Vec3& semi_axes_mm, int branches, std::uint64_t seed) {
  constexpr double thinnest_share = 0.06, thickest_share = 0.16;  // bar radii, of the mean semi-axis
  const double mean_axis = std::cbrt(semi_axes_mm[0] * semi_axes_mm[1] * semi_axes_mm[2]);
  const SolidPtr region = ellipsoid(centre_mm, semi_axes_mm);
  DemoRandom random(seed);
  std::vector<Vec3> knots{centre_mm};
  std::vector<SolidPtr> bars;
  // Far more tries than are needed even where most leave the region.
  for (int attempt = 0; attempt < 200 * branches && static_cast<int>(bars.size()) < branches; ++attempt) {
    const double radius = mean_axis * random(thinnest_share, thickest_share);
    const auto from = static_cast<std::size_t>(random() * static_cast<double>(knots.size()));
    const Vec3 to =
        knots[from] + Vec3{semi_axes_mm[0] * random(-0.7, 0.7), semi_axes_mm[1] * random(-0.7, 0.7),
                           semi_axes_mm[2] * random(-0.7, 0.7)};
    if (region->signed_distance_mm(to) > -radius) continue;
    bars.push_back(capsule(knots[from], to, radius));
    bars.push_back(sphere(to, std::min(1.6 * radius, -region->signed_distance_mm(to))));
    knots.push_back(to);
  }
  return united(bars);
}

double DemoRandom::operator()() {  // splitmix64
  state_ += 0x9e3779b97f4a7c15ULL;
  std::uint64_t x = state_;
  x = (x ^ (x >> 30)) * 0xbf58476d1ce4e5b9ULL;
  x = (x ^ (x >> 27)) * 0x94d049bb133111ebULL;
  return static_cast<double>((x ^ (x >> 31)) >> 11) / 9007199254740992.0;
}

std::string in_words(double value, int decimals, const std::string& unit) {
  char text[64];
  std::snprintf(text, sizeof text, "%.*f", decimals, value);
  return text + (unit.empty() ? "" : " " + unit);
}

}  // namespace halfmark
