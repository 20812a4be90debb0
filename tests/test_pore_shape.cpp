// Shapes of pores: areas and sphericities against published values, shape classes of known solids, and all
// that ITK measures on labels against ITK.
#include <itkLabelImageToShapeLabelMapFilter.h>
#include <itkShapeLabelObject.h>
#include <tbb/global_control.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <cstdio>
#include <random>
#include <utility>
#include <vector>

#include "analysis/crofton_area.h"
#include "analysis/pore_iso50.h"
#include "analysis/pore_shape.h"
#include "analysis/shape_class.h"
#include "tests/support/catch.h"
#include "tests/support/cement.h"
#include "tests/support/digitised.h"
#include "tests/support/label_images.h"

using namespace halfmark;
using namespace halfmark::tests;

namespace {

double area_of_cube(int n) {
  const std::int64_t edge = n;
  return crofton_area_mm2(std::vector<std::uint8_t>(static_cast<std::size_t>(n * n * n), 1),
                          {edge, edge, edge}, {1, 1, 1});
}

double mean_area_error_percent(double radius, int count, const Vec3& spacing, std::mt19937& random) {
  double sum = 0;
  const std::int64_t edge =
      2 * static_cast<std::int64_t>(radius / std::min({spacing[0], spacing[1], spacing[2]})) + 5;
  const auto directions = crofton_directions(spacing);
  for (int i = 0; i < count; ++i) {
    const auto runs = runs_of(digitised(ball(radius), edge, random_shift(random), spacing));
    sum += crofton_area_mm2(runs, directions, spacing[0] * spacing[1] * spacing[2]);
  }
  return 100 * (sum / count / (4 * pi * radius * radius) - 1);
}

}  // namespace

// Source of the expected values: Lehmann & Legland 2012 (weights; n = 3), the others computed from their
// definition.
TEST_CASE("Crofton weights and cube areas are the published ones") {
  for (const CroftonDirection& d : crofton_directions({1, 1, 1})) {
    const int axes = std::abs(d.step[0]) + std::abs(d.step[1]) + std::abs(d.step[2]);
    const double expected = 2 * (axes == 1 ? 0.0457779 : axes == 2 ? 0.0369806 : 0.0351956);
    CAPTURE(axes, d.weight, expected, d.weight - expected);
    CHECK(std::abs(d.weight - expected) < 2e-7);
  }
  const std::vector<std::pair<int, double>> cubes{
      {1, 3.00408}, {2, 16.47739}, {3, 41.07018}, {5, 123.61418}, {10, 524.56500}};
  for (const auto& [n, expected] : cubes) {
    const double area = area_of_cube(n);
    CAPTURE(n, area, expected, area - expected);
    CHECK(std::abs(area - expected) < 2e-5 * expected);
  }
}

TEST_CASE("Crofton weights of flat voxels sum to one and follow the axes") {
  for (const Vec3& spacing : {Vec3{1, 1, 1.25}, Vec3{0.3, 0.5, 2.0}, Vec3{1, 10, 1}}) {
    double sum = 0;
    for (const CroftonDirection& d : crofton_directions(spacing)) {
      CHECK(d.weight > 0);
      sum += d.weight;
    }
    CAPTURE(sum);
    CHECK(sum == Approx(1).epsilon(1e-9));
  }
  // Turning the axes turns the weights.
  const auto a = crofton_directions({1, 2, 3}), b = crofton_directions({3, 1, 2});
  const auto weight = [](const std::array<CroftonDirection, 13>& all, const std::array<int, 3>& step) {
    for (const CroftonDirection& d : all) {
      const bool same = d.step == step;
      const bool back = d.step == std::array<int, 3>{-step[0], -step[1], -step[2]};
      if (same || back) return d.weight;
    }
    return 0.0;
  };
  for (const CroftonDirection& d : a) {
    CHECK(weight(b, {d.step[2], d.step[0], d.step[1]}) == Approx(d.weight).epsilon(1e-9));
  }
}

// Source: Lehmann & Legland 2012 for a ball whose centre is no special place of the grid. (About a voxel
// centre it has 33401 voxels, the lattice points within 20.)
TEST_CASE("a digitised ball of radius 20 has the published area and volume") {
  std::mt19937 random(3);  // seed
  double volume = 0, area = 0;
  const int count = 24;
  for (int i = 0; i < count; ++i) {
    const auto runs = runs_of(digitised(ball(20), 45, random_shift(random)));
    volume += static_cast<double>(voxel_count(runs)) / count;
    area += crofton_area_mm2(runs, crofton_directions({1, 1, 1}), 1) / count;
  }
  CAPTURE(volume, volume - 33510, area, area - 5026);
  CHECK(std::abs(volume - 33510) <= 15);
  CHECK(std::abs(area - 5026) <= 2);
}

TEST_CASE("Crofton areas of balls at random places err as published") {
  std::mt19937 random(11);  // seed
  const std::vector<std::pair<double, double>> published{{2, -4.2}, {3, -1.8}, {5, -0.6}, {8, -0.1}};
  for (const auto& [radius, expected] : published) {
    const double error = mean_area_error_percent(radius, 200, {1, 1, 1}, random);
    CAPTURE(radius, error, expected, error - expected);
    CHECK(std::abs(error - expected) < 0.4);
  }
  const double flat = mean_area_error_percent(8, 40, {1, 1, 1.25}, random);
  CAPTURE(flat);
  CHECK(std::abs(flat) < 0.6);
}

TEST_CASE("Wadell sphericity of solids") {
  const double r2 = std::sqrt(2.0), r3 = std::sqrt(3.0), r5 = std::sqrt(5.0);
  const double spheroid_prolate = 2 * pi * (1 + 2 / (r3 / 2) * std::asin(r3 / 2));  // 1:1:2, e = sqrt(3)/2
  const double spheroid_oblate = 2 * pi * (1 + 0.25 / (r3 / 2) * std::atanh(r3 / 2));
  struct Solid {
    const char* name;
    double volume, area, sphericity;
  };
  // Source: Wadell 1935 (definition); cube and tetrahedron published, the others computed.
  const std::vector<Solid> solids{
      {"cube", 1, 6, 0.805996},
      {"tetrahedron", r2 / 12, r3, 0.671139},
      {"octahedron", r2 / 3, 2 * r3, 0.845583},
      {"dodecahedron", (15 + 7 * r5) / 4, 3 * std::sqrt(25 + 10 * r5), 0.910453},
      {"icosahedron", 5 * (3 + r5) / 12, 5 * r3, 0.939326},
      {"hemisphere", 2 * pi / 3, 3 * pi, 0.839947},
      {"cylinder h=d", 2 * pi, 6 * pi, 0.873580},
      {"cylinder L/D 2", 4 * pi, 10 * pi, 0.832034},
      {"cone h=d", 2 * pi / 3, pi * (1 + r5), 0.778674},
      {"prolate 1:1:2", 8 * pi / 3, spheroid_prolate, 0.928739},
      {"oblate 1:1:0.5", 2 * pi / 3, spheroid_oblate, 0.912872},
      {"sphere", 4 * pi / 3, 4 * pi, 1},
  };
  for (const Solid& s : solids) {
    const double sphericity = wadell_sphericity(s.volume, s.area);
    CAPTURE(s.name, sphericity, s.sphericity, sphericity - s.sphericity);
    CHECK(std::abs(sphericity - s.sphericity) < 2e-6);
  }
}

TEST_CASE("shape classes of known shapes") {
  const auto disc = [](double radius, double half) {
    return Inside([=](const Vec3& p) { return std::abs(p[2]) <= half && std::hypot(p[0], p[1]) <= radius; });
  };
  std::mt19937 random(51);  // seed
  for (int i = 0; i < 5; ++i) {
    const Rotation r = random_rotation(random);
    const Vec3 shift = random_shift(random);
    CHECK(described(digitised(ball(5), 20, shift)).shape == ShapeClass::round);
    CHECK(described(digitised(ball(9), 24, shift)).shape == ShapeClass::round);
    CHECK(described(digitised(turned(disc(10, 1.5), r), 30, shift)).shape == ShapeClass::flat);
    CHECK(described(digitised(turned(disc(2.5, 10), r), 30, shift)).shape == ShapeClass::irregular);  // rod
    CHECK(described(digitised(ball(1.2), 12, shift)).shape == ShapeClass::unclassified);
    const Inside star = [&](const Vec3& p) {  // three crossing rods
      const double x = std::abs(p[0]), y = std::abs(p[1]), z = std::abs(p[2]);
      return (std::hypot(y, z) <= 2 && x < 9) || (std::hypot(x, z) <= 2 && y < 9) ||
             (std::hypot(x, y) <= 2 && z < 9);
    };
    CHECK(described(digitised(turned(star, r), 30, shift)).shape == ShapeClass::irregular);
  }
  CHECK(shape_class({3, 2.5, 2.2, {}, {}, {}}, not_measured, 3, 0.1) == ShapeClass::unclassified);
  CHECK(shape_class({3, 2.5, 2.2, {}, {}, {}}, 0.95, 3, 1) == ShapeClass::unclassified);
  CHECK(shape_class({3, 2.5, 2.2, {}, {}, {}}, 0.95, 3, 0.1) == ShapeClass::round);
  CHECK(shape_class({3, 2.5, 2.2, {}, {}, {}}, 0.7, 3, 0.1) == ShapeClass::irregular);
}

TEST_CASE("descriptions do not depend on the number of threads") {
  RandomPores two = random_pores(71, {1, 1, 1.1}, 20);
  RandomPores one = random_pores(71, {1, 1, 1.1}, 20);
  GreyLevels levels;
  describe_pores(two.found, two.geometry, two.part, levels);
  {
    const tbb::global_control one_thread(tbb::global_control::max_allowed_parallelism, 1);
    describe_pores(one.found, one.geometry, one.part, levels);
  }
  const auto same = [](double a, double b) { return a == b || (std::isnan(a) && std::isnan(b)); };
  for (std::size_t i = 0; i < one.found.pores.size(); ++i) {
    const Pore &a = one.found.pores[i], &b = two.found.pores[i];
    CHECK(same(a.length_mm, b.length_mm));
    CHECK(same(a.width_mm, b.width_mm));
    CHECK(same(a.thickness_mm, b.thickness_mm));
    CHECK(same(a.surface_area_mm2, b.surface_area_mm2));
    CHECK(same(a.sphericity, b.sphericity));
    CHECK(same(a.depth_mm, b.depth_mm));
    CHECK(same(a.spacing_mm, b.spacing_mm));
    CHECK(a.nearest_id == b.nearest_id);
  }
}

namespace {

// ITK's statistics of every label beside ours; prints the largest differences.
void compare_with_itk(const char* what, SegmentedPores found, const VolumeGeometry& geometry) {
  PartMap part;
  part.has_outside = false;
  GreyLevels levels;
  describe_pores(found, geometry, part, levels);
  using Object = itk::ShapeLabelObject<std::uint32_t, 3>;
  using Map = itk::LabelMap<Object>;
  const auto filter = itk::LabelImageToShapeLabelMapFilter<LabelImage, Map>::New();
  filter->SetInput(label_image(found.field.labels, geometry.spacing_mm));
  filter->ComputeFeretDiameterOn();
  filter->ComputePerimeterOn();
  filter->Update();
  const Map* map = filter->GetOutput();
  const auto directions = crofton_directions(geometry.spacing_mm);
  double area_off = 0, radius_off = 0, feret_mean = 0, feret_most = 0, box_off = 0;
  int count = 0;
  for (const Pore& pore : found.pores) {
    const auto runs = runs_of(found.field.labels, pore.id);
    if (runs.empty()) continue;
    const Object* object = map->GetLabelObject(static_cast<std::uint32_t>(pore.id));
    const double area = crofton_area_mm2(runs, directions, geometry.voxel_volume_mm3());
    area_off = std::max(area_off, std::abs(area / object->GetPerimeter() - 1));
    radius_off = std::max(
        radius_off, std::abs(pore.equivalent_diameter_mm / 2 / object->GetEquivalentSphericalRadius() - 1));
    box_off = std::max(box_off, std::abs(static_cast<double>(pore.voxels) -
                                         static_cast<double>(object->GetNumberOfPixels())));
    // ITK measures between voxel centres.
    const double feret = (pore.length_mm - object->GetFeretDiameter()) / geometry.voxel_mm();
    feret_mean += feret;
    feret_most = std::max(feret_most, feret);
    CAPTURE(pore.id, pore.voxels, pore.length_mm, object->GetFeretDiameter(), feret);
    CHECK(feret > -1e-6);
    CHECK(feret < 1.3);
    ++count;
  }
  std::printf(
      "%s, %d labels against ITK: area off by at most %.2g, radius by %.2g (relative); length longer by "
      "%.2f voxel in the mean, %.2f at most (ITK: between voxel centres)\n",
      what, count, area_off, radius_off, feret_mean / count, feret_most);
  CHECK(count > 0);
  CHECK(box_off == 0);
  CHECK(radius_off < 1e-9);
  CHECK(area_off < 2e-5);
}

}  // namespace

TEST_CASE("label statistics agree with ITK's on random blobs") {
  RandomPores r = random_pores(81, {1, 1, 1}, 25);
  compare_with_itk("random blobs", r.found, r.geometry);
}

TEST_CASE("label statistics agree with ITK's on the real volume") {
  const auto volume = cement_volume();
  if (!volume) {
    WARN("skipped: ../shared/real_volumes is not there");
    return;
  }
  FieldOfView field;
  field.rows = full_mask(volume->geometry().size);
  PartMap part;
  part.inside = field.rows;
  part.has_outside = false;
  GreyLevels levels;
  levels.air = 31;
  levels.material = 101;
  levels.threshold = 66;
  PoreSpec spec;
  spec.min_voxels = 27;
  compare_with_itk("real volume", segment_pores_iso50(*volume, field, levels, part, spec),
                   volume->geometry());
}
