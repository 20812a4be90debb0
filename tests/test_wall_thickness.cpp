#include <tbb/global_control.h>

#include <algorithm>
#include <cmath>
#include <functional>
#include <numbers>

#include "analysis/wall_thickness.h"
#include "tests/support/catch.h"
#include "tests/support/meshes.h"
#include "tests/support/phantoms.h"

using namespace halfmark;
using namespace halfmark::meshes;

namespace {

constexpr double air = 15000, material = 47000, contrast = material - air;
constexpr double contrast_to_noise = 15;

struct Measurement {
  VolumeGeometry geometry;
  TriangleMesh mesh;
  PartMap part;
  WallMap walls;
  WallSpec spec;
};

struct Setup {
  double blur = 0.8, max_mm = 40, patch_mm2 = 25, closing_radius_mm = 3, noise = contrast / contrast_to_noise;
  std::uint64_t seed = 1;
  bool measure_levels = false;  // else levels, noise and blur are given
};

Measurement measured(const std::vector<ScannedBody>& bodies, const VolumeGeometry& geometry,
                     const Setup& setup) {
  ScanModel scan;
  scan.air_grey = air;
  scan.material_grey = material;
  scan.blur_voxel = setup.blur;
  scan.noise_grey = setup.noise;
  scan.seed = setup.seed;
  const MemoryVolume volume = render_scan(bodies, geometry, scan);
  const FieldOfView field = all_of(geometry);
  GreyLevels levels = given_levels(air, material);
  levels.blur_voxel = setup.blur;
  levels.air_noise = levels.material_noise = setup.noise;
  if (setup.measure_levels) levels = find_grey_levels(volume, field);
  PartOptions part_options;
  part_options.closing_radius_mm = setup.closing_radius_mm;
  Measurement m;
  m.geometry = geometry;
  m.part = find_part(volume, field, levels, part_options);
  SurfaceOptions outer;
  outer.fill_pores = true;
  outer.close_at_border = false;
  m.mesh = extract_surface(volume, field, levels, m.part, outer);
  m.spec.max_mm = setup.max_mm;
  m.spec.patch_mm2 = setup.patch_mm2;
  m.walls = measure_walls(m.mesh, geometry, m.part, levels, m.spec);
  return m;
}

VolumeGeometry geometry_of(std::int64_t nx, std::int64_t ny, std::int64_t nz,
                           const Vec3& spacing = {1, 1, 1}) {
  VolumeGeometry geometry;
  geometry.size = {nx, ny, nz};
  geometry.spacing_mm = spacing;
  return geometry;
}

Vec3 at(const TriangleMesh& mesh, std::size_t v) {
  const auto& p = mesh.vertices_mm[v];
  return {p[0], p[1], p[2]};
}

struct Deviations {
  double mean = 0, deviation = 0, least = 1e300, largest = -1e300;
  double wall_share = 0;  // of the vertices looked at
};

// Of thickness minus truth over the wall vertices whose truth is not negative.
Deviations deviations(const Measurement& m, const std::function<double(const Vec3&)>& truth_mm) {
  Deviations d;
  double sum = 0, squares = 0, n = 0, all = 0;
  for (std::size_t v = 0; v < m.mesh.vertices_mm.size(); ++v) {
    const double truth = truth_mm(at(m.mesh, v));
    if (truth < 0) continue;
    ++all;
    if (m.walls.is_wall[v] == 0) continue;
    const double e = m.walls.thickness_mm[v] - truth;
    sum += e;
    squares += e * e;
    ++n;
    d.least = std::min(d.least, e);
    d.largest = std::max(d.largest, e);
  }
  d.mean = sum / n;
  d.deviation = std::sqrt(std::max(0.0, squares / n - d.mean * d.mean));
  d.wall_share = n / all;
  return d;
}

#define SHOW(d)                                                                                       \
  INFO("voxels: mean error " << (d).mean << ", deviation " << (d).deviation << ", from " << (d).least \
                             << " to " << (d).largest << ", wall share " << (d).wall_share)

}  // namespace

TEST_CASE("plates of 5 to 20 voxels, axis-aligned and tilted, keep their thickness") {
  for (const double blur : {0.7, 1.0}) {
    for (const double thickness : {5.0, 8.0, 12.0, 20.0}) {
      for (const double tilt : {0.0, 7.0, 30.0}) {
        const double half = 25;
        const auto nz =
            static_cast<std::int64_t>(thickness + 14 + 2 * half * std::sin(tilt * std::numbers::pi / 180));
        const auto geometry = geometry_of(66, 66, nz);
        const Vec3 centre{32.6, 32.8, 0.5 * static_cast<double>(nz) + 0.3};
        const auto turn = rotation_about({1, 0.4, 0}, tilt);
        SolidPtr plate =
            box(centre - Vec3{half, half, 0.5 * thickness}, centre + Vec3{half, half, 0.5 * thickness});
        if (tilt > 0) plate = moved(plate, turn, centre, {0, 0, 0});
        Setup setup;
        setup.blur = blur;
        setup.measure_levels = true;  // as an inspection does: the thinnest plates show no plateau
        const Measurement m = measured({{plate, 1}}, geometry, setup);
        const Deviations d = deviations(m, [&](const Vec3& p) {
          const Vec3 q = p - centre;
          const double u = turn[0] * q[0] + turn[3] * q[1] + turn[6] * q[2];
          const double v = turn[1] * q[0] + turn[4] * q[1] + turn[7] * q[2];
          const double rim = half - std::max(std::abs(u), std::abs(v));
          return rim > 0.5 * thickness + 3 ? thickness : -1;
        });
        INFO("thickness " << thickness << ", tilt " << tilt << " degrees, blur " << blur);
        SHOW(d);
        CHECK(std::abs(d.mean) < 0.05);  // asked: 0.25
        CHECK(d.deviation < 0.2);
        CHECK(d.deviation < 1.5 * m.walls.standard_uncertainty_mm);
        CHECK(d.wall_share > 0.99);
        const WallSummary summary = summarise_walls(m.mesh, m.walls, m.spec, {}, 0);
        INFO("least wall " << summary.least_mm.value);
        REQUIRE(summary.any_wall);
        CHECK(std::abs(summary.least_mm.value - thickness) < 0.35);
        CHECK(std::abs(summary.mean_mm - thickness) < 0.1);
      }
    }
  }
}

TEST_CASE("the least wall of a sound block is its thickness, not its edges") {
  for (const std::uint64_t seed : {1, 2, 3}) {
    const Vec3 low{8.3, 8.6, 8.1};
    Setup setup;
    setup.blur = seed == 2 ? 0.7 : 1.0;
    setup.seed = seed;
    const Measurement m = measured({{box(low, low + Vec3{60, 60, 20}), 1}}, geometry_of(76, 76, 36), setup);
    const WallSummary summary = summarise_walls(m.mesh, m.walls, m.spec, {}, 18);
    INFO("least wall " << summary.least_mm.value << ", truth 20, difference " << summary.least_mm.value - 20
                       << " voxels; patches of 25 square voxels");
    REQUIRE(summary.any_wall);
    CHECK(std::abs(summary.least_mm.value - 20) < 0.25);
    CHECK(summary.spots.empty());
    REQUIRE(summary.percentiles.size() == 6);
    for (const auto& [percent, mm] : summary.percentiles) {
      if (percent > 1 && percent < 95) CHECK(std::abs(mm - 20) < 0.3);
    }
    CHECK(summary.percentiles[3].second == Approx(wall_percentile(m.mesh, m.walls, {}, 50)));
    // The distance of the least patch from the block's rim: no edge made it.
    const Vec3 p = summary.least_position_mm;
    CHECK(std::min({p[0] - low[0], low[0] + 60 - p[0], p[1] - low[1], low[1] + 60 - p[1]}) > 9);
  }
}

TEST_CASE("a tube, inside and outside") {
  const Vec3 from{30.2, 29.7, -20}, to{30.2, 29.7, 70};
  const SolidPtr tube =
      subtracted(cylinder(from, to, 20), {cylinder(from - Vec3{0, 0, 1}, to + Vec3{0, 0, 1}, 14)});
  Setup setup;
  setup.closing_radius_mm = 1;
  const Measurement m = measured({{tube, 1}}, geometry_of(61, 60, 40), setup);
  const Deviations d = deviations(m, [&](const Vec3& p) { return p[2] > 6 && p[2] < 33 ? 6 : -1; });
  SHOW(d);
  CHECK(std::abs(d.mean) < 0.06);
  CHECK(d.deviation < 0.2);
  CHECK(d.wall_share > 0.99);
  CHECK_FALSE(m.walls.warnings.empty());  // cut by the field
}

TEST_CASE("a wedge has at each place the sphere between its faces") {
  // Faces z = +- x tan(a), tip at x = 0: a sphere of radius r between them has its centre at x = r / sin a
  // and touches at x = r cos^2 a / sin a; seen from the centre the touches are 180 - 2 a degrees apart.
  const double a = 10 * std::numbers::pi / 180;
  const Vec3 tip{6.4, 0, 24.3};
  const auto turn = rotation_about({0, 1, 0}, 10), back = rotation_about({0, 1, 0}, -10);
  const SolidPtr slab = box({-200, -40, -200}, {200, 100, 0});
  const SolidPtr wedge = intersected({moved(slab, back, {0, 0, 0}, tip),
                                      moved(box({-200, -40, 0}, {200, 100, 200}), turn, {0, 0, 0}, tip),
                                      box({tip[0] + 12, 7.3, -100}, {tip[0] + 90, 44.6, 100})});
  const Measurement m = measured({{wedge, 1}}, geometry_of(104, 52, 49), Setup{});
  const Deviations d = deviations(m, [&](const Vec3& p) {
    const double x = p[0] - tip[0], y = p[1];
    const double r = x * std::sin(a) / (std::cos(a) * std::cos(a));
    if (x < 22 || x > 72 || y < 7.3 + r + 3 || y > 44.6 - r - 3) return -1.0;
    return 2 * r;
  });
  SHOW(d);
  CHECK(std::abs(d.mean) < 0.06);
  CHECK(d.deviation < 0.2);
  CHECK(d.wall_share > 0.99);
}

TEST_CASE("a step plate: each step has its thickness, the thin one is the spot") {
  const Vec3 low{6.3, 6.4, 6.7};
  const SolidPtr steps = united(
      {box(low, low + Vec3{70, 40, 6}), box(low, low + Vec3{48, 40, 9}), box(low, low + Vec3{26, 40, 13})});
  const Measurement m = measured({{steps, 1}}, geometry_of(84, 54, 28), Setup{});
  for (const auto& [x0, x1, thickness] :
       {std::array{8.0, 16.0, 13.0}, std::array{34.0, 42.0, 9.0}, std::array{56.0, 64.0, 6.0}}) {
    const Deviations d = deviations(m, [&](const Vec3& p) {
      const Vec3 q = p - low;
      return q[0] > x0 && q[0] < x1 && q[1] > 10 && q[1] < 30 ? thickness : -1;
    });
    INFO("step of " << thickness);
    SHOW(d);
    CHECK(std::abs(d.mean) < 0.06);
    CHECK(d.deviation < 0.2);
  }
  const WallSummary summary = summarise_walls(m.mesh, m.walls, m.spec, {}, 7.5);
  CHECK(std::abs(summary.least_mm.value - 6) < 0.3);
  REQUIRE(summary.spots.size() >= 1);
  // Both faces of the thin step, about 20 x 34 voxels each.
  for (const WallSpot& spot : summary.spots) {
    CHECK(std::abs(spot.patch_mean_mm - 6) < 0.3);
    CHECK(spot.least_mm <= spot.patch_mean_mm);
    CHECK(spot.position_mm[0] - low[0] > 46);
  }
  CHECK(summary.spots.size() <= 2);
  double area = 0;
  for (const WallSpot& spot : summary.spots) area += spot.area_mm2;
  CHECK(area > 2 * 16 * 30);
  CHECK(area < 2 * 24 * 40);
  // In a zone that leaves the thin step out, the next one is the least.
  std::vector<std::uint8_t> zone(m.mesh.vertices_mm.size());
  for (std::size_t v = 0; v < zone.size(); ++v) zone[v] = at(m.mesh, v)[0] - low[0] < 44;
  const WallSummary part = summarise_walls(m.mesh, m.walls, m.spec, zone, 7.5);
  CHECK(std::abs(part.least_mm.value - 9) < 0.3);
  CHECK(part.spots.empty());
}

TEST_CASE("pores in a wall do not split it unless asked") {
  const Vec3 low{6.3, 6.4, 6.7};
  const std::vector<ScannedBody> bodies{{box(low, low + Vec3{50, 50, 12}), 1},
                                        {sphere(low + Vec3{25, 25, 6.2}, 3.5), 0},
                                        {sphere(low + Vec3{17, 30, 5}, 2.5), 0}};
  const Measurement m = measured(bodies, geometry_of(63, 63, 26), Setup{});
  const WallSummary summary = summarise_walls(m.mesh, m.walls, m.spec, {}, 11);
  INFO("least wall " << summary.least_mm.value << ", truth 12");
  CHECK(std::abs(summary.least_mm.value - 12) < 0.3);
  CHECK(summary.spots.empty());
}

TEST_CASE("voxels of 1 x 1 x 1.25 and a turned direction") {
  const Vec3 spacing{0.1, 0.1, 0.125};
  VolumeGeometry geometry = geometry_of(66, 66, 40, spacing);
  geometry.origin_mm = {12, -7, 3};
  geometry.direction = rotation_about({1, 1, 0.3}, 25);
  const Vec3 centre = geometry.index_to_mm({32.6, 32.7, 19.8});
  const double half = 2.4, thickness = 0.9;
  const auto turn = rotation_about({0.2, 1, 0.4}, 33);
  const SolidPtr plate =
      moved(box(centre - Vec3{half, half, 0.5 * thickness}, centre + Vec3{half, half, 0.5 * thickness}), turn,
            centre, {0, 0, 0});
  Setup setup;
  setup.max_mm = 4;
  setup.patch_mm2 = 0.25;
  setup.closing_radius_mm = 0.3;
  const Measurement m = measured({{plate, 1}}, geometry, setup);
  const Deviations d = deviations(m, [&](const Vec3& p) {
    const Vec3 q = p - centre;
    const double u = turn[0] * q[0] + turn[3] * q[1] + turn[6] * q[2];
    const double v = turn[1] * q[0] + turn[4] * q[1] + turn[7] * q[2];
    return half - std::max(std::abs(u), std::abs(v)) > 0.5 * thickness + 0.35 ? thickness : -1;
  });
  SHOW(d);
  CHECK(std::abs(d.mean) < 0.05 * geometry.voxel_mm());
  CHECK(d.deviation < 0.2 * geometry.voxel_mm());
  CHECK(d.wall_share > 0.99);
}

TEST_CASE("walls of max_mm and more are at the cap, balls and rods are walls") {
  Setup setup;
  setup.max_mm = 15;
  const Vec3 low{6.3, 6.4, 6.7};
  const Measurement thick = measured({{box(low, low + Vec3{40, 40, 24}), 1}}, geometry_of(54, 54, 38), setup);
  const WallSummary summary = summarise_walls(thick.mesh, thick.walls, thick.spec, {}, 0);
  CHECK(summary.any_wall);
  CHECK(summary.least_mm.value > 14.5);
  CHECK(summary.least_mm.value <= 15);
  CHECK(std::count(thick.walls.at_cap.begin(), thick.walls.at_cap.end(), 1) > 500);
  for (const float t : thick.walls.thickness_mm) REQUIRE(t <= 15);

  const Measurement rod =
      measured({{cylinder({6, 20.3, 19.8}, {54, 20.3, 19.8}, 6), 1}}, geometry_of(61, 41, 41), setup);
  const Deviations d = deviations(rod, [](const Vec3& p) { return p[0] > 15 && p[0] < 45 ? 12 : -1; });
  SHOW(d);
  // Blur moves the level of a rod inwards by sigma^2 / 2R, chords and the least of many touches add to it.
  CHECK(d.mean > -0.5);
  CHECK(d.mean < 0.1);
  CHECK(d.wall_share > 0.98);
}

TEST_CASE("no surface, no walls") {
  const WallMap map = measure_walls({}, geometry_of(5, 5, 5), {}, given_levels(air, material), {});
  CHECK(map.thickness_mm.empty());
  CHECK_FALSE(summarise_walls({}, map, {}, {}, 1).any_wall);
  CHECK(wall_percentile({}, map, {}, 50) == 0);
}

TEST_CASE("the same thicknesses with one thread and two") {
  const Vec3 low{6.3, 6.4, 6.7};
  std::vector<WallMap> maps;
  std::vector<WallSummary> summaries;
  for (const std::size_t threads : {1, 2}) {
    tbb::global_control limit(tbb::global_control::max_allowed_parallelism, threads);
    const Measurement m = measured({{box(low, low + Vec3{40, 40, 10}), 1}}, geometry_of(54, 54, 24), Setup{});
    maps.push_back(m.walls);
    summaries.push_back(summarise_walls(m.mesh, m.walls, m.spec, {}, 9.8));
  }
  CHECK(maps[0].thickness_mm == maps[1].thickness_mm);
  CHECK(maps[0].is_wall == maps[1].is_wall);
  CHECK(maps[0].at_cap == maps[1].at_cap);
  CHECK(summaries[0].least_mm.value == summaries[1].least_mm.value);
  CHECK(summaries[0].mean_mm == summaries[1].mean_mm);
  REQUIRE(summaries[0].spots.size() == summaries[1].spots.size());
  for (std::size_t i = 0; i < summaries[0].spots.size(); ++i) {
    CHECK(summaries[0].spots[i].position_mm == summaries[1].spots[i].position_mm);
    CHECK(summaries[0].spots[i].area_mm2 == summaries[1].spots[i].area_mm2);
  }
}

TEST_CASE("cancelling stops the measurement") {
  RunControl control;
  control.cancel();
  CHECK_THROWS_AS(measure_walls({}, geometry_of(5, 5, 5), {}, given_levels(air, material), {}, control),
                  Problem);
}
