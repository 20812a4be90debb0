#include <cmath>
#include <functional>

#include "analysis/part_map.h"
#include "io/memory_volume.h"
#include "tests/support/catch.h"

using namespace halfmark;

namespace {

constexpr std::uint8_t air = 20, solid = 200;

// A volume of 0.1 mm voxels whose voxel (x, y, z) is solid where the function says so.
MemoryVolume volume_of(std::array<std::int64_t, 3> size,
                       const std::function<bool(double, double, double)>& is_solid) {
  VolumeGeometry geometry;
  geometry.size = size;
  geometry.spacing_mm = {0.1, 0.1, 0.1};
  MemoryVolume volume(geometry, VoxelType::u8);
  std::uint8_t* out = volume.voxels<std::uint8_t>();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (std::int64_t x = 0; x < size[0]; ++x) {
        *out++ =
            is_solid(static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)) ? solid : air;
      }
    }
  }
  return volume;
}

FieldOfView all_of(const VolumeGeometry& geometry) {
  FieldOfView field;
  field.rows = RunMask(geometry.size);
  for (std::int64_t r = 0; r < geometry.size[1] * geometry.size[2]; ++r) {
    field.rows.add_run({0, static_cast<std::int32_t>(geometry.size[0])});
    field.rows.end_row();
  }
  field.voxels = geometry.voxel_count();
  return field;
}

GreyLevels levels_of() {
  GreyLevels levels;
  levels.air = air;
  levels.material = solid;
  levels.threshold = 0.5 * (air + solid);
  return levels;
}

PartMap part_of(const MemoryVolume& volume, const PartOptions& options = {}) {
  return find_part(volume, all_of(volume.geometry()), levels_of(), options);
}

double distance(double x, double y, double z, const Vec3& c) { return length(Vec3{x, y, z} - c); }
bool in_box(double x, double y, double z, double lo, double hi) {
  return x >= lo && y >= lo && z >= lo && x < hi && y < hi && z < hi;
}

}  // namespace

TEST_CASE("a block with a closed cavity, a bottle-shaped pore, a dent and a chip") {
  // Closing ball of 5 voxels: the bottle's neck (2.5 voxels) holds it back, the dent (12 voxels) does not.
  const auto volume = volume_of({64, 64, 64}, [](double x, double y, double z) {
    if (distance(x, y, z, {4, 4, 4}) < 2.8) return true;  // chip
    if (!in_box(x, y, z, 12, 52)) return false;
    if (distance(x, y, z, {24, 24, 24}) < 4) return false;         // closed
    if (distance(x, y, z, {40, 40, 43}) < 4.5) return false;       // open: belly ...
    if (z > 43 && std::hypot(x - 40, y - 40) < 2.5) return false;  // ... and neck
    if (distance(x, y, z, {12, 32, 32}) < 12) return false;        // dent
    return true;
  });
  const PartMap part = part_of(volume);
  CHECK(part.has_outside);
  CHECK_FALSE(part.cut_by_field);
  REQUIRE(part.bodies.size() == 2);
  CHECK(part.bodies[1].voxels > 60);
  CHECK(part.bodies[0].min_mm[0] == Approx(1.2));
  CHECK(contains(part.inside, 24, 24, 24));
  CHECK(contains(part.inside, 40, 40, 43));
  CHECK_FALSE(contains(part.inside, 14, 32, 32));
  CHECK_FALSE(contains(part.inside, 4, 4, 4));
  CHECK(contains(part.open_air, 40, 40, 43));
  CHECK(contains(part.open_air, 40, 40, 49));
  CHECK_FALSE(contains(part.open_air, 24, 24, 24));
  // The block's flat faces are where the threshold puts them: nothing beyond, nothing lost.
  CHECK_FALSE(contains(part.inside, 11, 15, 15));
  CHECK(contains(part.inside, 12, 15, 15));
}

TEST_CASE("concave edges are not open pores") {
  // An L of two plates: the closing fills its inner edge, and that fill goes back to the outside.
  const auto volume = volume_of({64, 64, 40}, [](double x, double y, double z) {
    return z >= 6 && z < 34 &&
           ((x >= 8 && x < 20 && y >= 8 && y < 56) || (y >= 8 && y < 20 && x >= 8 && x < 56));
  });
  const PartMap part = part_of(volume);
  CHECK(part.open_air.empty());
  CHECK(part.inside.voxel_count() == part.material.voxel_count());
}

TEST_CASE("corners of three planes are not open pores, small pores with a neck are") {
  for (const double shift : {0.0, 0.3, 0.5, 0.8}) {
    // A box with a square pit: four corners of three planes at its bottom. Beside it a belly of 2.6 voxels
    // radius with a neck of 1.6.
    const auto volume = volume_of({64, 56, 44}, [shift](double x, double y, double z) {
      x += shift, y += 0.7 * shift, z += 0.4 * shift;
      if (!in_box(x, y, 1.5 * z, 6, 50)) return false;
      if (x > 12 && x < 30 && y > 12 && y < 40 && z > 14) return false;
      if (distance(x, y, z, {41, 26, 24}) < 2.6) return false;
      return !(z > 24 && std::hypot(x - 41, y - 26) < 1.6);
    });
    const PartMap part = part_of(volume);
    CAPTURE(shift, part.open_air.voxel_count());
    CHECK(contains(part.open_air, std::lround(41 - shift), std::lround(26 - 0.7 * shift),
                   std::lround(24 - 0.4 * shift)));
    for (std::int64_t z = 12; z < 40; ++z) {
      for (std::int64_t y = 10; y < 42; ++y) {
        for (std::int64_t x = 10; x < 32; ++x) {
          if (contains(part.open_air, x, y, z)) FAIL("open pore in the pit at " << x << " " << y << " " << z);
        }
      }
    }
  }
}

TEST_CASE("a tightly cropped part still has an outside") {
  const auto volume = volume_of({40, 40, 40}, [](double x, double y, double z) {
    return in_box(x, y, z, 2, 38) && distance(x, y, z, {20, 20, 20}) >= 5;
  });
  const PartMap part = part_of(volume);
  CHECK(part.has_outside);
  CHECK(part.open_air.empty());
  CHECK(part.inside.voxel_count() == 36 * 36 * 36);
}

TEST_CASE("material that fills the field has no outside; its pores at the border are inside") {
  const auto volume = volume_of({40, 40, 40}, [](double x, double y, double z) {
    return distance(x, y, z, {20, 20, 20}) >= 5 && distance(x, y, z, {0, 20, 20}) >= 4;
  });
  const PartMap part = part_of(volume);
  CHECK_FALSE(part.has_outside);
  CHECK(part.cut_by_field);
  CHECK(part.inside.voxel_count() == 40 * 40 * 40);
  CHECK(part.open_air.empty());
}

TEST_CASE("bodies are chosen by number") {
  const auto volume = volume_of({60, 30, 30}, [](double x, double y, double z) {
    return in_box(x, y, z, 4, 24) || in_box(x - 30, y, z, 6, 20);
  });
  PartOptions options;
  options.body = 2;
  const PartMap part = part_of(volume, options);
  CHECK(part.body == 2);
  CHECK(part.material.voxel_count() == 14 * 14 * 14);
  CHECK_FALSE(contains(part.inside, 10, 10, 10));
  options.body = 3;
  CHECK_THROWS_AS(part_of(volume, options), Problem);
}

TEST_CASE("a cancelled search stops") {
  const auto volume =
      volume_of({20, 20, 20}, [](double x, double y, double z) { return in_box(x, y, z, 4, 14); });
  RunControl control;
  control.cancel();
  CHECK_THROWS_AS(find_part(volume, all_of(volume.geometry()), levels_of(), {}, control), Problem);
}
