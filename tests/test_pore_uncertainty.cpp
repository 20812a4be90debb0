// The stated uncertainty of pore volumes and diameters against errors known from phantoms: neither optimistic
// nor absurdly wide.
#include <algorithm>
#include <cmath>
#include <map>
#include <numbers>
#include <vector>

#include "analysis/pore_mouths.h"
#include "analysis/pore_shape.h"
#include "analysis/pore_uncertainty.h"
#include "tests/support/catch.h"
#include "tests/support/label_runs.h"
#include "tests/support/phantoms.h"

using namespace halfmark;
using namespace halfmark::tests;
using std::numbers::pi;

namespace {

ScanModel scan_model(double blur_voxel, double contrast_to_noise) {
  ScanModel scan;
  scan.air_grey = 20000;
  scan.material_grey = 45000;
  scan.blur_voxel = blur_voxel;
  scan.noise_grey = 25000 / contrast_to_noise;
  scan.seed = 11;
  return scan;
}

// From grey values to described pores, levels and blur measured.
SegmentedPores pores_in(const VolumeSource& volume, double closing_radius_mm = 6) {
  const FieldOfView field = find_field_of_view(volume);
  const GreyLevels levels = find_grey_levels(volume, field);
  PartOptions options;
  options.closing_radius_mm = closing_radius_mm;
  options.open_min_depth_mm = 2;
  const PartMap part = find_part(volume, field, levels, options);
  const MaterialLevel level = fit_material_level(volume, field, levels, part);
  SegmentedPores found = segment_pores(volume, field, levels, part, level, {});
  describe_pores(found, volume.geometry(), part, levels);
  return found;
}

const Pore* nearest(const std::vector<Pore>& pores, const Vec3& place, double within) {
  const Pore* best = nullptr;
  for (const Pore& p : pores) {
    const double d = length(p.centre_mm - place);
    if (d < within && (best == nullptr || d < length(best->centre_mm - place))) best = &p;
  }
  return best;
}

struct Figures {
  int found = 0, volume_within = 0, diameter_within = 0;
  double volume_pull = 0, diameter_pull = 0;
};

void check_balls(double blur, double contrast_to_noise, const std::vector<double>& diameters) {
  std::vector<double> all;
  for (const double d : diameters) all.insert(all.end(), 40, d);
  const auto phantom = phantoms::balls_in_block(phantoms::cube_geometry(184), all, 6, 19, 0.86);
  const auto found =
      pores_in(render_scan(phantom.bodies, phantom.geometry, scan_model(blur, contrast_to_noise)));
  std::map<double, Figures> figures;
  for (const auto& ball : phantom.balls) {
    const Pore* pore = nearest(found.pores, ball.centre_mm, std::max(1.0, 0.5 * ball.diameter_mm));
    if (pore == nullptr) continue;
    Figures& f = figures[ball.diameter_mm];
    const double volume = std::abs(pore->volume_mm3.value - pi / 6 * std::pow(ball.diameter_mm, 3)) /
                          pore->volume_mm3.standard_uncertainty,
                 diameter = std::abs(pore->equivalent_diameter_mm - ball.diameter_mm) /
                            pore->diameter_standard_uncertainty_mm;
    ++f.found;
    f.volume_within += volume <= 2;
    f.diameter_within += diameter <= 2;
    f.volume_pull += volume;
    f.diameter_pull += diameter;
  }
  double whole = 0;
  for (const double d : diameters) {
    const Figures f = figures[d];
    CAPTURE(blur, contrast_to_noise, d, f.found, f.volume_within, f.diameter_within, f.volume_pull / f.found,
            f.diameter_pull / f.found);
    REQUIRE(f.found >= 38);
    CHECK(f.volume_within >= 0.9 * f.found);
    CHECK(f.diameter_within >= 0.9 * f.found);
    // Of a normal error the mean is 0.8 u. The largest balls come out a little better than stated.
    CHECK(f.volume_pull / f.found > 0.35);
    CHECK(f.volume_pull / f.found < 1.3);
    CHECK(f.diameter_pull / f.found > 0.35);
    CHECK(f.diameter_pull / f.found < 1.3);
    whole += f.volume_pull / f.found / static_cast<double>(diameters.size());
  }
  CHECK(whole > 0.4);
  CHECK(whole < 1.3);
}

}  // namespace

TEST_CASE("true volumes and diameters of balls lie within the stated uncertainty, blur 1.0") {
  check_balls(1.0, 10, {12, 8, 5, 3});
}

TEST_CASE("true volumes and diameters of balls lie within the stated uncertainty, blur 1.5") {
  check_balls(1.5, 5, {12, 8, 5});  // balls of 3 voxels do not show there
}

TEST_CASE("the edge's share grows with the surface of an irregular pore") {
  // Six balls of 7 voxels about a middle one, each joined to it: volumes of equal caps taken off twice.
  const auto geometry = phantoms::cube_geometry(80);
  const Vec3 middle{40.2, 39.7, 40.4};
  std::vector<SolidPtr> lobes{sphere(middle, 3.5)};
  const double apart = 5.5, radius = 3.5;
  for (const Vec3& axis : {Vec3{1, 0, 0}, Vec3{0, 1, 0}, Vec3{0, 0, 1}}) {
    lobes.push_back(sphere(middle + apart * axis, radius));
    lobes.push_back(sphere(middle - apart * axis, radius));
  }
  const double cap = radius - apart / 2;
  const double truth = 7 * 4 * pi / 3 * std::pow(radius, 3) - 6 * 2 * pi * cap * cap * (3 * radius - cap) / 3;
  std::vector<ScannedBody> bodies{
      {moved(box({8, 8, 8}, {72, 72, 72}), phantoms::slight_turn(), middle, {}), 1}, {united(lobes), 0}};
  const auto found = pores_in(render_scan(bodies, geometry, scan_model(0.8, 15)));
  REQUIRE(found.pores.size() == 1);
  const Pore& pore = found.pores[0];
  double edge = 0;
  for (const Contribution& c : pore.volume_mm3.contributions)
    edge = c.name == "edge position" ? c.standard_uncertainty : edge;
  const double error = pore.volume_mm3.value - truth, u = pore.volume_mm3.standard_uncertainty;
  CAPTURE(pore.volume_mm3.value, truth, error, u, edge, pore.surface_area_mm2);
  CHECK(std::abs(error) <= 2 * u);
  CHECK(pore.surface_area_mm2 > 1.2 * sphere_area(pore.volume_mm3.value));
  CHECK(edge == Approx(edge_error_widths * std::sqrt(0.64 + 1.0 / 12) * pore.surface_area_mm2).epsilon(0.03));
}

TEST_CASE("an open pore's volume is sure to where its mouth may lie") {
  // A ball of 10 voxels under a neck of 4.4, up to a face a hair off the voxel planes.
  const auto geometry = phantoms::cube_geometry(96);
  const Vec3 centre{47.7, 48.3, 46.1};
  const double face = 66.3, neck = 2.2, radius = 5;
  std::vector<ScannedBody> bodies{{box({12, 12, 12}, {84, 84, face}), 1},
                                  {sphere(centre, radius), 0},
                                  {cylinder(centre, {centre[0], centre[1], 90}, neck), 0}};
  const double into = std::sqrt(radius * radius - neck * neck), cap = radius - into;
  const double truth = 4 * pi / 3 * std::pow(radius, 3) + pi * neck * neck * (face - centre[2] - into) -
                       pi * cap * cap * (3 * radius - cap) / 3;
  const auto found = pores_in(render_scan(bodies, geometry, scan_model(0.8, 15)), 5);
  REQUIRE(found.pores.size() == 1);
  const Pore& pore = found.pores[0];
  REQUIRE(pore.open);
  const double error = pore.volume_mm3.value - truth, u = pore.volume_mm3.standard_uncertainty;
  CAPTURE(pore.volume_mm3.value, truth, error, u);
  CHECK(std::abs(error) <= 2 * u);
  CHECK(u < 0.15 * truth);
}

TEST_CASE("mouths by voxels: faces to the outside and air that no window holds") {
  VolumeGeometry geometry;
  geometry.size = {20, 20, 20};
  geometry.spacing_mm = {0.5, 0.5, 1};
  PartMap part;
  part.inside = mask_of(geometry.size, [](auto, auto, auto z) { return z < 15; });
  const auto shaft = [](auto x, auto y, auto z) {
    return x >= 8 && x < 12 && y >= 8 && y < 11 && z >= 5 && z < 15;
  };
  part.open_air = mask_of(geometry.size, shaft);
  SegmentedPores found = pores_of(
      labels_of(geometry.size, [&](auto x, auto y, auto z) { return shaft(x, y, z) && z < 12 ? 1 : 0; }),
      geometry);
  CHECK(pore_mouths(found, geometry, part).at(0).area_mm2 == 0);  // not open
  found.pores[0].open = true;
  const PoreMouth mouth = pore_mouths(found, geometry, part).at(0);
  CHECK(mouth.area_mm2 == Approx(4 * 3 * 0.25));
  CHECK(mouth.unheld_mm3 == Approx(4 * 3 * 3 * 0.25));
  // A mouth of 2 mm^2 under a ball of 2 mm: rim 0.798 + 3 * 0.1, dip 2 - sqrt(4 - rim^2).
  const double rim = std::sqrt(2 / pi) + 0.3, dip = 2 - std::sqrt(4 - rim * rim);
  CHECK(mouth_uncertainty_mm3({2, 0}, 2, 0.1) == Approx(2 * dip / std::sqrt(3.0)));
  CHECK(mouth_uncertainty_mm3({2, 0.3}, 2, 0.1) == Approx(std::hypot(2 * dip / std::sqrt(3.0), 0.3)));
}

TEST_CASE("terms of the volume add in squares") {
  Pore pore;
  pore.volume_mm3.value = 8;
  pore.equivalent_diameter_mm = std::cbrt(6 * 8 / pi);
  set_volume_term(pore, "noise", 3);
  set_volume_term(pore, "edge position", 1);
  set_volume_term(pore, "edge position", 4);
  CHECK(pore.volume_mm3.contributions.size() == 2);
  CHECK(pore.volume_mm3.standard_uncertainty == Approx(5));
  CHECK(pore.diameter_standard_uncertainty_mm == Approx(pore.equivalent_diameter_mm * 5 / 24));
  CHECK(sphere_area(4 * pi / 3 * 27) == Approx(4 * pi * 9));
}
