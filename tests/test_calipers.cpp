// Calipers of points, of digitised solids of known size, and of blurred balls.
#include <algorithm>
#include <cmath>
#include <cstdint>
#include <cstdio>
#include <random>
#include <vector>

#include "analysis/calipers.h"
#include "analysis/pore_shape.h"
#include "tests/support/catch.h"
#include "tests/support/digitised.h"

using namespace halfmark;
using namespace halfmark::tests;

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
