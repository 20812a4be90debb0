#include <tbb/global_control.h>

#include <algorithm>
#include <cmath>
#include <cstring>
#include <numbers>
#include <vector>

#include "analysis/blurred_body.h"
#include "tests/support/catch.h"
#include "tests/support/phantoms.h"

using namespace halfmark;
using phantoms::cube_geometry;

namespace {

double sum_of_shares(const MemoryVolume& volume) {
  double sum = 0;
  const float* v = volume.voxels<float>();
  for (std::int64_t i = 0; i < volume.geometry().voxel_count(); ++i) sum += v[i];
  return sum;
}

ScanModel plain_shares() {
  ScanModel scan;
  scan.air_grey = 0;
  scan.material_grey = 1;
  scan.blur_voxel = 0;
  scan.type = VoxelType::f32;
  return scan;
}

}  // namespace

TEST_CASE("summed partial volumes equal the solids' volumes") {
  phantoms::Uniform random(3);
  for (const double radius : {1.5, 3.0, 10.0}) {
    double sum = 0;
    constexpr int balls = 12;
    for (int i = 0; i < balls; ++i) {
      const Vec3 centre{14 + random(), 14 + random(), 14 + random()};
      sum += sum_of_shares(render_scan({{sphere(centre, radius), 1}}, cube_geometry(30), plain_shares()));
    }
    const double truth = balls * 4.0 / 3.0 * std::numbers::pi * radius * radius * radius;
    INFO("radius " << radius << " voxels: " << sum << " voxels, truth " << truth << ", difference "
                   << 100 * (sum / truth - 1) << " %");
    // Largest error seen for a single ball: 0.005 %.
    CHECK(std::abs(sum / truth - 1) < 1e-4);
  }
  const auto turned =
      moved(box({8.2, 9.1, 7.7}, {21.4, 19.9, 22.2}), phantoms::slight_turn(), {15, 15, 15}, {0, 0, 0});
  const double truth = (21.4 - 8.2) * (19.9 - 9.1) * (22.2 - 7.7);
  CHECK(sum_of_shares(render_scan({{turned, 1}}, cube_geometry(30), plain_shares())) ==
        Approx(truth).epsilon(1e-4));
}

TEST_CASE("blur keeps the summed share and widens a ball by its variance") {
  ScanModel scan = plain_shares();
  const auto sharp = render_scan({{sphere({20, 20, 20}, 4), 1}}, cube_geometry(41), scan);
  scan.blur_voxel = 1.3;
  const auto blurred = render_scan({{sphere({20, 20, 20}, 4), 1}}, cube_geometry(41), scan);
  CHECK(sum_of_shares(blurred) == Approx(sum_of_shares(sharp)).epsilon(1e-4));
  const auto variance_x = [](const MemoryVolume& volume) {
    double sum = 0, second = 0;
    const float* v = volume.voxels<float>();
    for (std::int64_t i = 0; i < volume.geometry().voxel_count(); ++i) {
      const double x = static_cast<double>(i % 41) - 20;
      sum += v[i];
      second += v[i] * x * x;
    }
    return second / sum;
  };
  CHECK(variance_x(blurred) - variance_x(sharp) == Approx(1.3 * 1.3).epsilon(0.002));
}

TEST_CASE("noise has its standard deviation and correlation, and slabs fit together") {
  ScanModel scan;
  scan.noise_grey = 900;
  scan.type = VoxelType::f32;
  scan.seed = 5;
  for (const double correlation : {0.0, 1.0}) {
    scan.noise_correlation_voxel = correlation;
    const auto volume = render_scan({{box({-100, -100, -100}, {200, 200, 200}), 1}}, cube_geometry(64), scan);
    const float* v = volume.voxels<float>();
    double sum = 0, squares = 0, products = 0;
    const std::int64_t n = volume.geometry().voxel_count();
    for (std::int64_t i = 0; i < n; ++i) {
      const double a = v[i] - 40000.0, b = i % 64 < 63 ? v[i + 1] - 40000.0 : 0;
      sum += a;
      squares += a * a;
      products += a * b;
    }
    const double deviation = std::sqrt(squares / static_cast<double>(n)), lag = products / squares * 64 / 63;
    // White noise smoothed by a Gaussian of width s has the autocorrelation exp(-1 / (4 s^2)) at lag 1.
    const double expected = correlation > 0 ? std::exp(-0.25 / (correlation * correlation)) : 0;
    INFO("deviation " << deviation << ", lag-1 correlation " << lag << ", expected " << expected);
    CHECK(deviation == Approx(900).epsilon(0.02));
    CHECK(std::abs(lag - expected) < 0.02);
    const auto source = scan_of({{box({-100, -100, -100}, {200, 200, 200}), 1}}, cube_geometry(64), scan);
    std::vector<float> planes(64 * 64 * 3);
    source->read_planes(29, 32, reinterpret_cast<std::byte*>(planes.data()));
    CHECK(std::memcmp(planes.data(), v + 29 * 64 * 64, planes.size() * sizeof(float)) == 0);
  }
}

TEST_CASE("cupping, padding and clipping are as described") {
  ScanModel scan;
  scan.blur_voxel = 0;
  scan.cupping = 0.08;
  scan.padding_radius_mm = 28;
  scan.padding_grey = 0;
  const auto volume = render_scan({{box({-100, -100, -100}, {200, 200, 200}), 1}}, cube_geometry(61), scan);
  const auto at = [&](std::int64_t x, std::int64_t y) {
    return static_cast<double>(volume.voxels<std::uint16_t>()[(30 * 61 + y) * 61 + x]);
  };
  CHECK(at(30, 30) == Approx(40000 - 0.08 * 32000).margin(1));
  CHECK(at(30 + 20, 30) == Approx(40000 - 0.08 * 32000 * (1 - 20.0 * 20.0 / (30.5 * 30.5))).margin(1));
  CHECK(at(30 + 28, 30) > 30000);
  CHECK(at(30 + 29, 30) == 0);
  scan.material_grey = 90000;
  scan.cupping = 0;
  const auto bright = render_scan({{box({-100, -100, -100}, {200, 200, 200}), 1}}, cube_geometry(9), scan);
  CHECK(bright.voxels<std::uint16_t>()[9 * 9 * 4 + 9 * 4 + 4] == 65535);
}

TEST_CASE("the volume does not depend on slab height or thread count") {
  const auto phantom = phantoms::balls_in_block(cube_geometry(48, {1, 1, 1.25}), {9, 6, 4, 3}, 2, 3);
  ScanModel scan;
  scan.blur_voxel = 1.1;
  scan.noise_grey = 2000;
  scan.noise_correlation_voxel = 0.6;
  scan.cupping = 0.07;
  scan.ring_grey = 300;
  const auto whole = render_scan(phantom.bodies, phantom.geometry, scan);
  const auto source = scan_of(phantom.bodies, phantom.geometry, scan);
  const std::size_t plane = 48 * 48 * 2;
  for (const std::int64_t height : {1, 5, 17, 48}) {
    std::vector<std::byte> slabs(plane * 48);
    for (std::int64_t z = 0; z < 48; z += height) {
      source->read_planes(z, std::min<std::int64_t>(z + height, 48),
                          slabs.data() + plane * static_cast<std::size_t>(z));
    }
    INFO("slab height " << height);
    CHECK(std::memcmp(slabs.data(), whole.resident(), slabs.size()) == 0);
  }
  const tbb::global_control one_thread(tbb::global_control::max_allowed_parallelism, 1);
  const auto alone = render_scan(phantom.bodies, phantom.geometry, scan);
  CHECK(std::memcmp(alone.resident(), whole.resident(), plane * 48) == 0);
}
