// Shapes of pores: areas and sphericities against published values, calipers against solids of known size,
// depth and spacing against brute force, all of them against ITK's label statistics where it has them.
#include <itkConnectedComponentImageFilter.h>
#include <itkLabelImageToShapeLabelMapFilter.h>
#include <itkShapeLabelObject.h>
#include <tbb/global_control.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <cstdio>
#include <functional>
#include <numbers>
#include <random>
#include <vector>

#include "analysis/calipers.h"
#include "analysis/crofton_area.h"
#include "analysis/pore_iso50.h"
#include "analysis/pore_outline.h"
#include "analysis/pore_shape.h"
#include "analysis/pore_spacing.h"
#include "analysis/run_grid.h"
#include "analysis/shape_class.h"
#include "tests/support/catch.h"
#include "tests/support/cement.h"
#include "tests/support/label_images.h"

using namespace halfmark;
using namespace halfmark::tests;

namespace {

constexpr double pi = std::numbers::pi;
using Inside = std::function<bool(const Vec3&)>;  // mm, about the origin

std::vector<VoxelRun> runs_of(const RunLabels& labels, std::int32_t label = 1) {
  const PoreRuns runs(labels, label);
  const auto of = runs.of(label);
  return {of.begin(), of.end()};
}

// A body about the middle of a cubic volume, moved by `shift` voxels.
RunLabels digitised(const Inside& body, std::int64_t edge, const Vec3& shift,
                    const Vec3& spacing = {1, 1, 1}) {
  const double middle = static_cast<double>(edge - 1) / 2;
  return labels_of({edge, edge, edge}, [&](auto x, auto y, auto z) {
    const Vec3 at{static_cast<double>(x) - middle - shift[0], static_cast<double>(y) - middle - shift[1],
                  static_cast<double>(z) - middle - shift[2]};
    return body({at[0] * spacing[0], at[1] * spacing[1], at[2] * spacing[2]}) ? 1 : 0;
  });
}

Inside ball(double radius) {
  return [=](const Vec3& p) { return length(p) <= radius; };
}

// Rows are the axes of a turned body.
using Rotation = std::array<Vec3, 3>;
Rotation random_rotation(std::mt19937& random) {
  std::normal_distribution<double> normal;
  const auto vector = [&] { return Vec3{normal(random), normal(random), normal(random)}; };
  const Vec3 a = vector(), b = vector();
  const Vec3 u = (1 / length(a)) * a;
  const Vec3 across = b - dot(b, u) * u;
  const Vec3 v = (1 / length(across)) * across;
  return {u, v, cross(u, v)};
}
Inside turned(const Inside& body, const Rotation& r) {
  return [=](const Vec3& p) { return body({dot(r[0], p), dot(r[1], p), dot(r[2], p)}); };
}

double area_of_cube(int n) {
  const std::int64_t edge = n;
  return crofton_area_mm2(std::vector<std::uint8_t>(static_cast<std::size_t>(n * n * n), 1),
                          {edge, edge, edge}, {1, 1, 1});
}

Vec3 random_shift(std::mt19937& random) {
  std::uniform_real_distribution<double> within(-0.5, 0.5);
  const double x = within(random), y = within(random);
  return {x, y, within(random)};
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

TEST_CASE("calipers of points: boxes, needles, and brute force over many directions") {
  std::mt19937 random(5);  // seed
  std::normal_distribution<double> normal;
  for (int trial = 0; trial < 30; ++trial) {
    const Rotation r = random_rotation(random);
    std::vector<Vec3> corners;
    const double a = 9, b = 5, c = 2;
    for (int i = 0; i < 8; ++i) {
      corners.push_back((i & 1 ? a : 0) * r[0] + (i & 2 ? b : 0) * r[1] + (i & 4 ? c : 0) * r[2]);
    }
    const Calipers box = measure_calipers(corners);
    CAPTURE(trial, box.length, box.width, box.thickness);
    CHECK(box.length == Approx(std::sqrt(a * a + b * b + c * c)).epsilon(1e-9));
    CHECK(std::abs(box.thickness - c) < 0.02);
    CHECK(box.length >= box.width);
    CHECK(box.width >= box.thickness);
  }
  for (int trial = 0; trial < 10; ++trial) {
    std::vector<Vec3> cloud;
    for (int i = 0; i < 60; ++i) cloud.push_back({3 * normal(random), 2 * normal(random), normal(random)});
    const Calipers found = measure_calipers(cloud);
    double longest = 0;
    for (const Vec3& p : cloud) {
      for (const Vec3& q : cloud) longest = std::max(longest, length(p - q));
    }
    double thinnest = 1e9, widest = 0;
    for (int i = 0; i < 40000; ++i) {
      const Vec3 any{normal(random), normal(random), normal(random)};
      const Vec3 across = any - dot(any, found.length_axis) * found.length_axis;
      const auto caliper = [&](const Vec3& v) {
        double low = 1e9, high = -1e9;
        for (const Vec3& p : cloud) {
          low = std::min(low, dot(p, v) / length(v));
          high = std::max(high, dot(p, v) / length(v));
        }
        return high - low;
      };
      thinnest = std::min(thinnest, caliper(any));
      widest = std::max(widest, caliper(across));
    }
    CAPTURE(trial, found.length, longest, found.width, widest, found.thickness, thinnest);
    CHECK(found.length == Approx(longest).epsilon(1e-9));
    CHECK(found.width >= widest * (1 - 1e-9));
    CHECK(found.width < widest * 1.001);
    CHECK(found.thickness < thinnest * 1.002);
    CHECK(found.thickness > thinnest * 0.98);
  }
}

TEST_CASE("degenerate points have calipers") {
  const std::vector<Vec3> one{{1, 2, 3}};
  CHECK(measure_calipers(one).length == 0);
  const std::vector<Vec3> line{{0, 0, 0}, {3, 0, 4}};
  const Calipers c = measure_calipers(line);
  CHECK(c.length == Approx(5));
  CHECK(c.thickness < 0.05);
}

namespace {

Pore described(const RunLabels& labels, const Vec3& spacing = {1, 1, 1}) {
  VolumeGeometry geometry;
  geometry.size = labels.size();
  geometry.spacing_mm = spacing;
  SegmentedPores found = pores_of(labels, geometry);
  PartMap part;
  part.has_outside = false;
  GreyLevels levels;
  levels.blur_voxel = 0.7;
  describe_pores(found, geometry, part, levels);
  return found.pores.at(0);
}

}  // namespace

TEST_CASE("calipers of digitised balls at random places") {
  std::mt19937 random(21);  // seed
  for (const double d : {3.0, 4.0, 5.0, 8.0, 12.0, 20.0, 30.0}) {
    Vec3 mean{};
    const int count = d > 15 ? 10 : 40;
    for (int i = 0; i < count; ++i) {
      const Pore p =
          described(digitised(ball(d / 2), static_cast<std::int64_t>(d) + 6, random_shift(random)));
      mean = mean + (1.0 / count) * Vec3{p.length_mm, p.width_mm, p.thickness_mm};
    }
    std::printf("digitised ball of %4.1f voxels: length %+.2f, width %+.2f, thickness %+.2f voxel off\n", d,
                mean[0] - d, mean[1] - d, mean[2] - d);
    CAPTURE(d, mean[0] - d, mean[1] - d, mean[2] - d);
    // Digitisation leaves flat places along the axes: a label alone cannot tell better.
    CHECK(std::abs((mean[0] + mean[1] + mean[2]) / 3 - d) < 0.2);
    CHECK(std::abs(mean[0] - d) < 0.45);
    CHECK(std::abs(mean[1] - d) < 0.35);
    CHECK(std::abs(mean[2] - d) < 0.5);
  }
}

TEST_CASE("calipers of turned ellipsoids, cylinders and boxes") {
  std::mt19937 random(31);  // seed
  struct Shape {
    const char* name;
    Inside body;
    double length, width, thickness;
  };
  const auto ellipsoid = [](double a, double b, double c) {
    return Inside([=](const Vec3& p) {
      return p[0] * p[0] / (a * a) + p[1] * p[1] / (b * b) + p[2] * p[2] / (c * c) <= 1;
    });
  };
  const auto cylinder = [](double radius, double half) {
    return Inside([=](const Vec3& p) { return std::abs(p[2]) <= half && std::hypot(p[0], p[1]) <= radius; });
  };
  const auto box = [](double a, double b, double c) {
    return Inside(
        [=](const Vec3& p) { return std::abs(p[0]) <= a && std::abs(p[1]) <= b && std::abs(p[2]) <= c; });
  };
  const double none = -1;  // not compared: corners are lost to digitisation
  const std::vector<Shape> shapes{{"ellipsoid 24 x 16 x 8", ellipsoid(12, 8, 4), 24, 16, 8},
                                  {"ellipsoid 10 x 8 x 6", ellipsoid(5, 4, 3), 10, 8, 6},
                                  {"rod 4 x 24", cylinder(2, 12), std::hypot(4, 24), none, 4},
                                  {"disc 20 x 3", cylinder(10, 1.5), std::hypot(20, 3), 20, 3},
                                  {"box 20 x 12 x 6", box(10, 6, 3), none, none, 6}};
  for (const Shape& shape : shapes) {
    Vec3 mean{};
    const int count = 12;
    for (int i = 0; i < count; ++i) {
      const Inside body = turned(shape.body, random_rotation(random));
      const Pore p = described(digitised(body, 34, random_shift(random)));
      mean = mean + (1.0 / count) * Vec3{p.length_mm, p.width_mm, p.thickness_mm};
    }
    std::printf("turned %s: length %.2f, width %.2f, thickness %.2f\n", shape.name, mean[0], mean[1],
                mean[2]);
    CAPTURE(shape.name, mean[0], mean[1], mean[2]);
    if (shape.length > 0) CHECK(std::abs(mean[0] - shape.length) < 0.7);
    if (shape.width > 0) CHECK(std::abs(mean[1] - shape.width) < 0.5);
    CHECK(std::abs(mean[2] - shape.thickness) < 0.75);
  }
}

namespace {

// A ball of radius r blurred by a Gaussian, at a distance from its centre (exact).
double blurred_ball(double distance, double r, double sigma) {
  const double s = sigma * std::sqrt(2.0);
  if (distance < 1e-6) return std::erf(r / s) - 2 * (r / s) / std::sqrt(pi) * std::exp(-r * r / s / s);
  const double a = (r - distance) / s, b = (r + distance) / s;
  return (std::erf(a) + std::erf(b)) / 2 -
         sigma / (distance * std::sqrt(2 * pi)) * (std::exp(-a * a) - std::exp(-b * b));
}

// A pore as the local method hands it on: shares with noise, label grown to half of its own peak of the
// smoothed shares, volume known.
Pore blurred_pore(double diameter, double sigma, double noise, std::mt19937& random) {
  const double radius = diameter / 2;
  const double total_sigma = std::sqrt(sigma * sigma + 1.0 / 12);
  const std::int64_t edge = static_cast<std::int64_t>(diameter) + 14;
  VolumeGeometry geometry;
  geometry.size = {edge, edge, edge};
  const Vec3 centre = static_cast<double>(edge - 1) / 2 * Vec3{1, 1, 1} + random_shift(random);
  std::normal_distribution<double> normal(0, noise);
  const auto count = static_cast<std::size_t>(geometry.voxel_count());
  std::vector<float> share(count);
  std::vector<double> distance(count);
  for (std::size_t i = 0; i < count; ++i) {
    const auto n = static_cast<std::int64_t>(i);
    const Vec3 at{static_cast<double>(n % edge), static_cast<double>(n / edge % edge),
                  static_cast<double>(n / edge / edge)};
    distance[i] = length(at - centre);
    share[i] = static_cast<float>(blurred_ball(distance[i], radius, total_sigma) + normal(random));
  }
  std::vector<float> smoothed = share;
  for (const std::int64_t stride : {std::int64_t{1}, edge, edge * edge}) {
    const std::vector<float> in = smoothed;
    for (std::int64_t i = stride; i < static_cast<std::int64_t>(count) - stride; ++i) {
      const auto at = [&](std::int64_t k) { return in[static_cast<std::size_t>(k)]; };
      smoothed[static_cast<std::size_t>(i)] = 0.25F * (at(i - stride) + at(i + stride)) + 0.5F * at(i);
    }
  }
  float peak = 0;
  for (std::size_t i = 0; i < count; ++i) {
    if (distance[i] < radius + 1) peak = std::max(peak, smoothed[i]);
  }
  SegmentedPores found = pores_of(labels_of(geometry.size,
                                            [&](auto x, auto y, auto z) {
                                              const auto i =
                                                  static_cast<std::size_t>((z * edge + y) * edge + x);
                                              return smoothed[i] >= peak / 2 && distance[i] < radius + 2;
                                            }),
                                  geometry);
  found.field.windows = labels_of(geometry.size, [](auto, auto, auto) { return 1; });
  found.field.fraction.clear();
  for (const float s : share) {
    found.field.fraction.push_back(static_cast<std::int16_t>(std::lround(s * PoreField::unit)));
  }
  found.pores.at(0).volume_mm3.value = pi / 6 * diameter * diameter * diameter;
  PartMap part;
  part.has_outside = false;
  GreyLevels levels;
  levels.blur_voxel = sigma;
  describe_pores(found, geometry, part, levels);
  return found.pores[0];
}

}  // namespace

TEST_CASE("a blurred, noisy ball reads its own diameter in all three calipers") {
  std::mt19937 random(41);  // seed
  for (const double noise : {0.0, 0.05}) {
    for (const double d : {3.0, 4.0, 6.0, 10.0, 20.0}) {
      Vec3 mean{};
      const int count = 12;
      for (int i = 0; i < count; ++i) {
        const Pore p = blurred_pore(d, 1.0, noise, random);
        mean = mean + (1.0 / count) * Vec3{p.length_mm, p.width_mm, p.thickness_mm};
      }
      std::printf(
          "ball of %4.1f voxels, blur 1, noise %.2f: length %+.2f, width %+.2f, thickness %+.2f voxel off\n",
          d, noise, mean[0] - d, mean[1] - d, mean[2] - d);
      CAPTURE(d, noise, mean[0] - d, mean[1] - d, mean[2] - d);
      CHECK(std::abs(mean[0] - d) < 0.25);
      CHECK(std::abs(mean[1] - d) < 0.2);
      CHECK(std::abs(mean[2] - d) < 0.4);
    }
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

namespace {

struct RandomPores {
  VolumeGeometry geometry;
  SegmentedPores found;
  PartMap part;
};

RandomPores random_pores(std::uint32_t seed, const Vec3& spacing, int count) {
  std::mt19937 random(seed);
  RandomPores out;
  const std::int64_t edge = 56;
  out.geometry.size = {edge, edge, edge};
  out.geometry.spacing_mm = spacing;
  std::uniform_real_distribution<double> place(14, 42), radius(1, 4.5);
  std::vector<std::array<double, 4>> balls;
  for (int i = 0; i < count; ++i) {
    const double x = place(random), y = place(random), z = place(random);
    balls.push_back({x, y, z, radius(random)});
  }
  const RunLabels labels = labels_of(out.geometry.size, [&](auto x, auto y, auto z) {
    for (int i = 0; i < count; ++i) {
      const auto& b = balls[static_cast<std::size_t>(i)];
      const double dx = static_cast<double>(x) - b[0], dy = static_cast<double>(y) - b[1],
                   dz = static_cast<double>(z) - b[2];
      if (dx * dx + dy * dy + dz * dz <= b[3] * b[3]) return i + 1;
    }
    return 0;
  });
  out.found = pores_of(labels, out.geometry);
  out.part.inside = mask_of(out.geometry.size, [&](auto x, auto y, auto z) {  // a turned block
    const double u = 0.8 * static_cast<double>(x - 28) + 0.6 * static_cast<double>(y - 28);
    const double v = -0.6 * static_cast<double>(x - 28) + 0.8 * static_cast<double>(y - 28);
    return std::abs(u) < 21 && std::abs(v) < 21 && z > 6 && z < 50;
  });
  return out;
}

std::vector<Vec3> voxels_of(const SegmentedPores& found, std::int32_t id, const Vec3& spacing) {
  std::vector<Vec3> out;
  for (const VoxelRun& r : runs_of(found.field.labels, id)) {
    for (std::int32_t x = r.begin; x < r.end; ++x) {
      out.push_back({x * spacing[0], r.y * spacing[1], r.z * spacing[2]});
    }
  }
  return out;
}

double least_gap(const std::vector<Vec3>& a, const std::vector<Vec3>& b, const Vec3& spacing) {
  double best = 1e9;
  for (const Vec3& p : a) {
    for (const Vec3& q : b) best = std::min(best, voxel_gap_mm(p - q, spacing));
  }
  return best;
}

}  // namespace

TEST_CASE("gaps between voxels: faces, edges, corners") {
  CHECK(voxel_gap_mm({0, 0, 0}, {1, 1, 1}) == 0);
  CHECK(voxel_gap_mm({1, 0, 0}, {1, 1, 1}) == 0);
  CHECK(voxel_gap_mm({3, 0, 0}, {1, 1, 1}) == Approx(2));
  CHECK(voxel_gap_mm({0, 0, 2.5}, {1, 1, 1.25}) == Approx(1.25));
  CHECK(voxel_gap_mm({3, 3, 0}, {1, 1, 1}) == Approx(3 * std::sqrt(2.0) - std::sqrt(0.5)));
}

TEST_CASE("depth and spacing are those of brute force") {
  for (const Vec3& spacing : {Vec3{1, 1, 1}, Vec3{0.2, 0.2, 0.25}}) {
    RandomPores r = random_pores(61, spacing, 14);
    const std::size_t n = r.found.pores.size();
    const std::vector<double> no_shift(n, 0.0);
    measure_depth(r.found, r.geometry, r.part, no_shift);
    measure_spacing(r.found, r.geometry, no_shift);
    std::vector<Vec3> outside;
    for (std::int64_t z = 0; z < 56; ++z) {
      for (std::int64_t y = 0; y < 56; ++y) {
        for (std::int64_t x = 0; x < 56; ++x) {
          if (contains(r.part.inside, x, y, z)) continue;
          outside.push_back({static_cast<double>(x) * spacing[0], static_cast<double>(y) * spacing[1],
                             static_cast<double>(z) * spacing[2]});
        }
      }
    }
    std::vector<std::vector<Vec3>> voxels;
    for (std::size_t i = 0; i < n; ++i) {
      voxels.push_back(voxels_of(r.found, static_cast<std::int32_t>(i) + 1, spacing));
    }
    for (std::size_t i = 0; i < n; ++i) {
      const Pore& pore = r.found.pores[i];
      if (voxels[i].empty()) continue;
      double spacing_mm = 1e9;
      std::int32_t nearest = 0;
      for (std::size_t k = 0; k < n; ++k) {
        if (k == i || voxels[k].empty()) continue;
        const double gap = least_gap(voxels[i], voxels[k], spacing);
        if (gap < spacing_mm) spacing_mm = gap, nearest = static_cast<std::int32_t>(k) + 1;
      }
      CAPTURE(i, pore.spacing_mm, spacing_mm, pore.nearest_id, nearest);
      CHECK(pore.spacing_mm == Approx(spacing_mm).margin(1e-12));
      CHECK(pore.nearest_id == nearest);
      if (i > 5) continue;  // brute force is slow
      const double depth = least_gap(voxels[i], outside, spacing);
      CAPTURE(pore.depth_mm, depth);
      CHECK(pore.depth_mm == Approx(depth).margin(1e-12));
    }
    const std::vector<PoreGap> gaps = gaps_between_pores(r.found, r.geometry, std::vector<double>(n, 4.0));
    std::size_t expected = 0;
    for (std::size_t i = 0; i < n; ++i) {
      for (std::size_t k = i + 1; k < n; ++k) {
        if (!voxels[i].empty() && !voxels[k].empty() && least_gap(voxels[i], voxels[k], spacing) <= 4.0)
          ++expected;
      }
    }
    CHECK(gaps.size() == expected);
  }
}

TEST_CASE("depth below a face and gap between two balls, in true lengths") {
  VolumeGeometry geometry;
  geometry.size = {60, 40, 40};
  SegmentedPores found = pores_of(
      labels_of(geometry.size,
                [](auto x, auto y, auto z) {
                  const auto in = [&](double cx, double r) {
                    return std::hypot(std::hypot(static_cast<double>(x) - cx, static_cast<double>(y) - 20.3),
                                      static_cast<double>(z) - 19.6) <= r;
                  };
                  return in(18.2, 5) ? 1 : in(38.7, 4) ? 2 : 0;
                }),
      geometry);
  PartMap part;
  part.inside = mask_of(geometry.size, [](auto x, auto y, auto z) {
    return x >= 4 && x < 56 && y > 0 && y < 39 && z > 0 && z < 39;
  });
  GreyLevels levels;
  describe_pores(found, geometry, part, levels);
  // The face lies at x = 3.5, the balls reach from 13.2 to 23.2 and from 34.7 to 42.7.
  CAPTURE(found.pores[0].depth_mm, found.pores[0].spacing_mm);
  CHECK(std::abs(found.pores[0].depth_mm - 9.7) < 0.5);
  CHECK(std::abs(found.pores[0].spacing_mm - 11.5) < 0.7);
  CHECK(found.pores[0].nearest_id == 2);
  CHECK(found.pores[1].nearest_id == 1);

  found.pores[0].open = true;
  found.pores[0].kind = PoreKind::open;
  found.pores[1].kind = PoreKind::inclusion;
  describe_pores(found, geometry, part, levels);
  CHECK(found.pores[0].depth_mm == 0);
  CHECK(std::isnan(found.pores[0].spacing_mm));  // an inclusion is no neighbour
  CHECK(found.pores[0].nearest_id == 0);
  CHECK(found.pores[1].nearest_id == 1);

  part.has_outside = false;
  describe_pores(found, geometry, part, levels);
  CHECK(std::isnan(found.pores[0].depth_mm));
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
