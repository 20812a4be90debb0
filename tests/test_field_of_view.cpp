#include <algorithm>
#include <cmath>
#include <cstdlib>

#include "analysis/field_of_view.h"
#include "tests/support/catch.h"
#include "tests/support/phantoms.h"

using namespace halfmark;

namespace {

ScanModel noisy_scan() {
  ScanModel scan;
  scan.air_grey = 12000;
  scan.noise_grey = 1500;
  return scan;
}

const std::vector<ScannedBody>& block() {
  static const std::vector<ScannedBody> bodies{
      {moved(box({14, 14, 14}, {50, 50, 50}), phantoms::slight_turn(), {32, 32, 32}, {0, 0, 0}), 1}};
  return bodies;
}

}  // namespace

TEST_CASE("padding outside a cylinder is left out, whatever its value") {
  for (const double padding : {0.0, 60000.0}) {
    ScanModel scan = noisy_scan();
    scan.padding_radius_mm = 30.2;
    scan.padding_grey = padding;
    const FieldOfView field = find_field_of_view(render_scan(block(), phantoms::cube_geometry(64), scan));
    REQUIRE(field.padding_grey.has_value());
    CHECK(*field.padding_grey == padding);
    for (std::int64_t y = 0; y < 64; ++y) {
      const double h2 = 30.2 * 30.2 - (static_cast<double>(y) - 31.5) * (static_cast<double>(y) - 31.5);
      const auto row = field.rows.row(y, 20);
      if (h2 < 0) {
        CHECK(row.empty());
        continue;
      }
      const auto begin = static_cast<int>(std::ceil(31.5 - std::sqrt(h2)));
      REQUIRE(row.size() == 1);
      CHECK(std::abs(row[0].begin - begin) <= 1);
      CHECK(std::abs(row[0].end - (64 - begin)) <= 1);
    }
  }
}

TEST_CASE("a constant frame and constant planes are left out") {
  MemoryVolume volume = render_scan(block(), phantoms::cube_geometry(64), noisy_scan());
  std::uint16_t* v = volume.voxels<std::uint16_t>();
  for (std::int64_t z = 0; z < 64; ++z) {
    for (std::int64_t y = 0; y < 64; ++y) {
      for (std::int64_t x = 0; x < 64; ++x) {
        if (x < 5 || x >= 60 || y < 4 || y >= 61 || z < 3) v[(z * 64 + y) * 64 + x] = 0;
      }
    }
  }
  const FieldOfView field = find_field_of_view(volume);
  CHECK_FALSE(field.whole());
  CHECK(field.voxels == 55 * 57 * 61);
}

TEST_CASE("air is not taken for padding") {
  CHECK(find_field_of_view(render_scan(block(), phantoms::cube_geometry(64), noisy_scan())).whole());
  ScanModel clipped = noisy_scan();
  clipped.air_grey = -5000;  // all air is clipped to 0
  CHECK(find_field_of_view(render_scan(block(), phantoms::cube_geometry(64), clipped)).whole());
  ScanModel clean = noisy_scan();
  clean.noise_grey = 0;  // a volume without noise
  CHECK(find_field_of_view(render_scan(block(), phantoms::cube_geometry(64), clean)).whole());
}

TEST_CASE("padding is found whatever lies beside it") {
  const VolumeGeometry geometry = phantoms::cube_geometry(64);
  ScanModel scan;
  scan.type = VoxelType::u8;
  scan.air_grey = 5;
  scan.material_grey = 160;
  scan.noise_grey = 15;
  scan.padding_radius_mm = 30.2;
  // Pixels of a plane within the radius about the slice's centre at 31.5.
  std::int64_t inside = 0;
  for (int y = 0; y < 64; ++y) {
    for (int x = 0; x < 64; ++x) inside += (x - 31.5) * (x - 31.5) + (y - 31.5) * (y - 31.5) <= 30.2 * 30.2;
  }
  const auto voxels_found = [&](const std::vector<ScannedBody>& bodies) {
    return find_field_of_view(render_scan(bodies, geometry, scan)).voxels;
  };
  // Zero beside air of which a third is clipped to zero.
  CHECK(voxels_found(block()) == 64 * inside);
  // The air's own grey value.
  scan.air_grey = scan.padding_grey = 30;
  CHECK(voxels_found(block()) == 64 * inside);
  // Material that fills the field and is cut by it.
  scan.padding_grey = 0;
  CHECK(voxels_found({{box({-9, -9, 8}, {80, 80, 80}), 1}, {sphere({32, 32, 32}, 8), 0}}) == 64 * inside);
  // No noise at all.
  scan.noise_grey = 0;
  CHECK(voxels_found(block()) == 64 * inside);
  // A source that is read plane by plane sees the same.
  scan.noise_grey = 15;
  CHECK(find_field_of_view(*scan_of(block(), geometry, scan)).voxels == 64 * inside);
}

TEST_CASE("a frame on one side is left out") {
  MemoryVolume volume = render_scan(block(), phantoms::cube_geometry(64), noisy_scan());
  std::uint16_t* v = volume.voxels<std::uint16_t>();
  for (std::int64_t r = 0; r < 64 * 64; ++r) std::fill(v + r * 64, v + r * 64 + 9, std::uint16_t{0});
  CHECK(find_field_of_view(volume).voxels == 55 * 64 * 64);
}

TEST_CASE("constant air around a round part through all planes is no padding") {
  const std::vector<ScannedBody> rod{{cylinder({32, 32, -20}, {32, 32, 90}, 25), 1},
                                     {sphere({32, 32, 32}, 7), 0}};
  ScanModel clean = noisy_scan();
  clean.noise_grey = 0;
  CHECK(find_field_of_view(render_scan(rod, phantoms::cube_geometry(64), clean)).whole());
  for (const double blur : {0.5, 1.0}) {
    ScanModel clipped = noisy_scan();
    clipped.type = VoxelType::u8;
    clipped.blur_voxel = blur;
    clipped.air_grey = -8;
    clipped.material_grey = 160;
    clipped.noise_grey = 1.5;
    CHECK(find_field_of_view(render_scan(rod, phantoms::cube_geometry(64), clipped)).whole());
  }
}
