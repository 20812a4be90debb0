#include <algorithm>
#include <array>
#include <cmath>
#include <vector>

#include "analysis/solids.h"
#include "tests/support/catch.h"
#include "tests/support/phantoms.h"

using namespace halfmark;

TEST_CASE("signed distances vanish on known surface points and have the right sign") {
  const auto near_zero = [](double d) { return std::abs(d) < 1e-9; };
  CHECK(near_zero(sphere({1, 2, 3}, 2)->signed_distance_mm({3, 2, 3})));
  CHECK(near_zero(box({0, 0, 0}, {2, 4, 6})->signed_distance_mm({2, 1, 1})));
  CHECK(box({0, 0, 0}, {2, 4, 6})->signed_distance_mm({1, 2, 3}) == Approx(-1));
  CHECK(box({0, 0, 0}, {2, 4, 6})->signed_distance_mm({5, 8, 3}) == Approx(5));
  CHECK(near_zero(cylinder({0, 0, 0}, {0, 0, 5}, 2)->signed_distance_mm({0, 2, 1})));
  CHECK(cylinder({0, 0, 0}, {0, 0, 5}, 2)->signed_distance_mm({0, 5, 9}) == Approx(5));
  CHECK(capsule({0, 0, 0}, {0, 0, 5}, 2)->signed_distance_mm({0, 0, 8}) == Approx(1));
  CHECK(torus({0, 0, 0}, {0, 0, 1}, 5, 1)->signed_distance_mm({5, 0, 0}) == Approx(-1));
}

TEST_CASE("an ellipsoid's distance equals the least distance to a dense set of its points") {
  const Vec3 e{3, 2, 1};
  const auto solid = ellipsoid({0, 0, 0}, e);
  std::vector<Vec3> surface;
  constexpr int steps = 700;
  for (int i = 0; i <= steps; ++i) {
    for (int j = 0; j < 2 * steps; ++j) {
      const double t = 3.14159265358979 * i / steps, p = 3.14159265358979 * j / steps;
      surface.push_back(
          {e[0] * std::sin(t) * std::cos(p), e[1] * std::sin(t) * std::sin(p), e[2] * std::cos(t)});
    }
  }
  phantoms::Uniform random(11);
  for (int i = 0; i < 12; ++i) {
    const Vec3 p{random(-4, 4), random(-3, 3), random(-2, 2)};
    double least = 1e300;
    for (const Vec3& s : surface) least = std::min(least, length(s - p));
    const double inside = p[0] * p[0] / 9 + p[1] * p[1] / 4 + p[2] * p[2] < 1 ? -1 : 1;
    INFO("at " << p[0] << " " << p[1] << " " << p[2] << ": " << solid->signed_distance_mm(p) << ", dense set "
               << inside * least);
    CHECK(std::abs(solid->signed_distance_mm(p) - inside * least) < 0.01);
  }
}

TEST_CASE("unions and differences are the logic of their parts; turned solids turn") {
  const auto a = sphere({0, 0, 0}, 2), b = box({1, -1, -1}, {4, 1, 1});
  const auto both = united({a, b}), cut = subtracted(a, {b}), common = intersected({a, b});
  phantoms::Uniform random(2);
  for (int i = 0; i < 500; ++i) {
    const Vec3 p{random(-5, 5), random(-3, 3), random(-3, 3)};
    const bool in_a = a->signed_distance_mm(p) < 0, in_b = b->signed_distance_mm(p) < 0;
    CHECK((both->signed_distance_mm(p) < 0) == (in_a || in_b));
    CHECK((cut->signed_distance_mm(p) < 0) == (in_a && !in_b));
    CHECK((common->signed_distance_mm(p) < 0) == (in_a && in_b));
  }
  const auto turned =
      moved(box({1, -0.5, -0.5}, {3, 0.5, 0.5}), rotation_about({0, 0, 1}, 90), {0, 0, 0}, {0, 0, 1});
  CHECK(turned->signed_distance_mm({0, 2, 1}) == Approx(-0.5));
  CHECK(turned->bounds().max_mm[1] == Approx(3));
}

TEST_CASE("a union of many solids equals the least of their distances, near and far") {
  phantoms::Uniform random(17);
  std::vector<SolidPtr> parts;
  for (int i = 0; i < 150; ++i)
    parts.push_back(sphere({random(0, 30), random(0, 20), random(0, 4)}, random(0.1, 1.2)));
  const auto crowd = united(parts), rest = subtracted(box({0, 0, 0}, {30, 20, 4}), parts);
  int near = 0;
  for (int i = 0; i < 4000; ++i) {
    const Vec3 p{random(-5, 35), random(-5, 25), random(-4, 8)};
    double least = 1e300;
    for (const auto& part : parts) least = std::min(least, part->signed_distance_mm(p));
    const double d = crowd->signed_distance_mm(p);
    INFO("at " << p[0] << " " << p[1] << " " << p[2] << ": " << d << ", one by one " << least);
    CHECK(d <= least + 1e-12);
    CHECK((d < 0) == (least < 0));
    if (least < 1.5) {  // within a cell of the surface the distance is exact
      CHECK(d == Approx(least).margin(1e-12));
      ++near;
    }
    const double in_box = box({0, 0, 0}, {30, 20, 4})->signed_distance_mm(p);
    CHECK((rest->signed_distance_mm(p) < 0) == (in_box < 0 && least > 0));
  }
  CHECK(near > 400);
}
