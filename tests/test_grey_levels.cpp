#include <cmath>
#include <limits>
#include <string>

#include "analysis/grey_levels.h"
#include "tests/support/catch.h"
#include "tests/support/phantoms.h"

using namespace halfmark;

namespace {

// A slightly turned block with balls of 3 to 20 voxels.
const phantoms::BallPhantom& block() {
  static const phantoms::BallPhantom phantom = [] {
    std::vector<double> diameters;
    for (const double d : {20.0, 15.0, 10.0, 8.0, 6.0, 5.0, 4.0, 3.0})
      diameters.insert(diameters.end(), d > 12 ? 2 : 10, d);
    return phantoms::balls_in_block(phantoms::cube_geometry(100), diameters, 5, 4);
  }();
  return phantom;
}

ScanModel scan_model(double blur, double contrast_to_noise, double cupping) {
  ScanModel scan;
  scan.air_grey = 20000;
  scan.material_grey = 45000;
  scan.blur_voxel = blur;
  scan.noise_grey = 25000 / contrast_to_noise;
  scan.cupping = cupping;
  return scan;
}

GreyLevels levels_of(const VolumeSource& volume, const GreySpec& given = {}) {
  return find_grey_levels(volume, find_field_of_view(volume), given);
}

std::string refusal_of(const VolumeSource& volume) {
  try {
    levels_of(volume);
  } catch (const Problem& problem) {
    CHECK(problem.status() == ExitStatus::bad_data);
    return problem.what();
  }
  return "";
}

}  // namespace

TEST_CASE("levels, noise and blur of phantoms") {
  for (const double blur : {0.7, 1.0, 1.5}) {
    for (const double cnr : {30.0, 10.0, 5.0}) {
      for (const double cupping : {0.0, 0.08}) {
        if (cupping > 0 && cnr != 10) continue;
        const GreyLevels levels =
            levels_of(render_scan(block().bodies, block().geometry, scan_model(blur, cnr, cupping)));
        const double noise = 25000 / cnr;
        INFO("blur " << blur << " voxel, contrast-to-noise " << cnr << ", cupping " << cupping << ": air "
                     << levels.air << " (20000), material " << levels.material << " (45000), noise "
                     << levels.air_noise << " and " << levels.material_noise << " (" << noise << "), blur "
                     << levels.blur_voxel << ", difference " << levels.blur_voxel - blur << " voxel");
        CHECK(std::abs(levels.air - 20000) < 0.01 * 25000);
        // Cupping spreads the material's level over 8 % of the contrast; its mode lies within.
        CHECK(levels.material < 45000 + 0.01 * 25000);
        CHECK(levels.material > 45000 - (0.01 + cupping) * 25000);
        CHECK(std::abs(levels.material_noise / noise - 1) < 0.02);
        CHECK(std::abs(levels.air_noise / noise - 1) < 0.02);
        CHECK(levels.blur_measured);
        CHECK(std::abs(levels.blur_voxel / blur - 1) < (cnr < 10 ? 0.05 : 0.03));
        CHECK(levels.noise_is_white);
      }
    }
  }
}

TEST_CASE("blur is that of the scan when voxels are not cubes") {
  auto geometry = phantoms::cube_geometry(96, {0.1, 0.1, 0.125});
  const auto phantom = phantoms::balls_in_block(geometry, {1.6, 1.2}, 0.6, 3);
  const GreyLevels levels = levels_of(render_scan(phantom.bodies, geometry, scan_model(1.0, 20, 0)));
  const double truth = geometry.voxel_mm();
  INFO("blur " << levels.blur_mm << " mm, truth " << truth << " mm, difference "
               << (levels.blur_mm - truth) / geometry.voxel_mm() << " voxel");
  CHECK(std::abs(levels.blur_mm / truth - 1) < 0.03);
}

TEST_CASE("correlated noise is called correlated") {
  ScanModel scan = scan_model(0.8, 10, 0);
  scan.noise_correlation_voxel = 0.7;
  const GreyLevels levels = levels_of(render_scan(block().bodies, block().geometry, scan));
  // White noise smoothed by a Gaussian of width s correlates by exp(-1 / (4 s^2)) with the next voxel.
  const double truth = std::exp(-0.25 / 0.49);
  CHECK_FALSE(levels.noise_is_white);
  for (const double c : levels.noise_correlation) {
    INFO("lag-1 correlation " << c << ", truth " << truth << ", difference " << c - truth);
    // Blocks of a few correlation lengths lose some of it with their trend.
    CHECK(std::abs(c - truth) < 0.1);
  }
}

TEST_CASE("clipped air, gaps of stretched 8-bit data and a third phase do not mislead the peaks") {
  ScanModel clipped = scan_model(0.8, 10, 0);
  clipped.air_grey = 1500;
  clipped.material_grey = 26500;
  const GreyLevels dark = levels_of(render_scan(block().bodies, block().geometry, clipped));
  INFO("air " << dark.air << ", material " << dark.material);
  CHECK(std::abs(dark.material - 26500) < 0.025 * 25000);
  CHECK(std::abs(dark.air - 1500) < 0.06 * 25000);
  CHECK_FALSE(dark.warnings.empty());

  // 8 bits stretched to 16: only every 257th grey value occurs.
  MemoryVolume comb = render_scan(block().bodies, block().geometry, scan_model(0.8, 20, 0));
  std::uint16_t* v = comb.voxels<std::uint16_t>();
  for (std::int64_t i = 0; i < comb.geometry().voxel_count(); ++i)
    v[i] = static_cast<std::uint16_t>(v[i] / 257 * 257);
  const GreyLevels gaps = levels_of(comb);
  CHECK(std::abs(gaps.air - 20000) < 0.03 * 25000);
  CHECK(std::abs(gaps.material - 45000) < 0.03 * 25000);
  CHECK(gaps.other_peaks.empty());

  auto bodies = block().bodies;
  bodies.push_back({box({30, 30, 30}, {55, 55, 55}), 1.6});
  const GreyLevels three = levels_of(render_scan(bodies, block().geometry, scan_model(0.8, 20, 0)));
  CHECK(std::abs(three.material - 45000) < 0.03 * 25000);
  INFO("further peaks " << (three.other_peaks.empty() ? 0 : three.other_peaks.front()) << " ... "
                        << (three.other_peaks.empty() ? 0 : three.other_peaks.back()));
  REQUIRE(three.other_peaks.size() == 1);
  CHECK(three.other_peaks[0] == Approx(60000).epsilon(0.02));
}

TEST_CASE("every voxel type gives the same levels") {
  for (const VoxelType type :
       {VoxelType::u8, VoxelType::i8, VoxelType::u16, VoxelType::i16, VoxelType::f32}) {
    ScanModel scan = scan_model(0.8, 15, 0);
    const bool small = bytes_per_voxel(type) == 1;
    scan.air_grey = small ? -40 : -9000;
    scan.material_grey = small ? 60 : 16000;
    if (type == VoxelType::u8 || type == VoxelType::u16) {
      scan.air_grey += small ? 90 : 20000;
      scan.material_grey += small ? 90 : 20000;
    }
    const double contrast = scan.material_grey - scan.air_grey;
    scan.noise_grey = contrast / 15;
    scan.type = type;
    const GreyLevels levels = levels_of(render_scan(block().bodies, block().geometry, scan));
    INFO("type " << static_cast<int>(type) << ": air " << levels.air << ", material " << levels.material
                 << ", noise " << levels.material_noise);
    CHECK(std::abs(levels.air - scan.air_grey) < 0.02 * contrast);
    CHECK(std::abs(levels.material - scan.material_grey) < 0.02 * contrast);
    CHECK(std::abs(levels.material_noise * 15 / contrast - 1) < 0.03);
  }
}

TEST_CASE("volumes that cannot carry levels are refused with the reason") {
  ScanModel scan = scan_model(0.8, 10, 0);
  scan.air_grey = scan.material_grey;
  CHECK(refusal_of(render_scan(block().bodies, block().geometry, scan)).find("only one phase") !=
        std::string::npos);
  scan.noise_grey = 0;
  CHECK(refusal_of(render_scan(block().bodies, block().geometry, scan)).find("same grey value") !=
        std::string::npos);
  scan = scan_model(0.8, 10, 0);
  scan.type = VoxelType::f32;
  MemoryVolume floats = render_scan(block().bodies, block().geometry, scan);
  floats.voxels<float>()[100 * 100 * 3 + 100 * 2 + 1] = std::numeric_limits<float>::quiet_NaN();
  floats.voxels<float>()[100 * 100 * 5] = std::numeric_limits<float>::infinity();
  const std::string sentence = refusal_of(floats);
  INFO(sentence);
  CHECK(sentence.find("(1, 2, 3)") != std::string::npos);
  CHECK(sentence.find("2 voxels") != std::string::npos);
}

TEST_CASE("levels of the spec are taken as given") {
  const auto volume = render_scan(block().bodies, block().geometry, scan_model(0.8, 10, 0));
  GreySpec given;
  given.air = 19000;
  given.material = 44000;
  const GreyLevels both = levels_of(volume, given);
  CHECK(both.threshold == 31500);
  CHECK(both.source == "spec");
  given.air.reset();
  const GreyLevels one = levels_of(volume, given);
  CHECK(one.material == 44000);
  CHECK(std::abs(one.air - 20000) < 0.025 * 25000);
  CHECK(one.source == "spec, auto");
}

namespace {

// A rod through air, of 96 voxels cubed.
std::vector<ScannedBody> rod() { return {{cylinder({47, 46, 10}, {50, 49, 86}, 22), 1}}; }

void check_levels(const GreyLevels& levels, double air, double material, double noise, double share = 0.015) {
  CAPTURE(levels.air, air, levels.material, material, levels.material_noise, noise, levels.blur_voxel);
  CHECK(std::abs(levels.air - air) < share * (material - air));
  CHECK(std::abs(levels.material - material) < share * (material - air));
  CHECK(levels.material_noise == Approx(noise).epsilon(0.06));
}

}  // namespace

TEST_CASE("air or material that is clipped to one value is still a phase") {
  const auto geometry = phantoms::cube_geometry(96);
  ScanModel scan = scan_model(0.8, 20, 0);
  scan.air_grey = -9000;  // every voxel of the air ends at 0
  scan.material_grey = 45000;
  scan.noise_grey = 1250;
  const GreyLevels dark = levels_of(render_scan(rod(), geometry, scan));
  check_levels(dark, 0, 45000, 1250);
  CHECK_FALSE(dark.warnings.empty());

  scan.air_grey = 20000;
  scan.material_grey = 75000;
  const GreyLevels bright = levels_of(render_scan(rod(), geometry, scan));
  CAPTURE(bright.air, bright.material);
  CHECK(std::abs(bright.air - 20000) < 700);
  CHECK(bright.material == 65535);

  scan.type = VoxelType::u8;
  scan.air_grey = -20;
  scan.material_grey = 180;
  scan.noise_grey = 5;
  check_levels(levels_of(render_scan(rod(), geometry, scan)), 0, 180, 5);
}

TEST_CASE("dense inclusions leave the material's noise and level alone") {
  auto bodies = block().bodies;
  phantoms::Uniform random(3);
  for (int i = 0; i < 60; ++i)
    bodies.push_back({sphere({random(20, 80), random(20, 80), random(20, 80)}, 4), 1.5});
  check_levels(levels_of(render_scan(bodies, block().geometry, scan_model(0.8, 20, 0))), 20000, 45000, 1250);
}

TEST_CASE("one voxel of a huge value does not hide the phases of a float volume") {
  ScanModel scan = scan_model(0.8, 20, 0);
  scan.type = VoxelType::f32;
  MemoryVolume volume = render_scan(block().bodies, block().geometry, scan);
  volume.voxels<float>()[1234567 % volume.geometry().voxel_count()] = 1e9f;
  volume.voxels<float>()[777] = -1e12f;
  check_levels(levels_of(volume), 20000, 45000, 1250);
}

TEST_CASE("partial volumes are no further phase") {
  const auto geometry = phantoms::cube_geometry(96);
  for (const double noise : {0.0, 200.0, 1250.0}) {
    for (const double blur : {0.3, 0.8}) {
      ScanModel scan = scan_model(blur, 20, 0);
      scan.noise_grey = noise;
      // Faces along the voxel axes, at thirds of a voxel.
      const std::vector<ScannedBody> bodies{{box({15.3, 14.7, 16.1}, {80.4, 79.7, 81.2}), 1},
                                            {box({30.3, 30.7, 30.1}, {50.4, 50.7, 50.2}), 0}};
      const GreyLevels levels = levels_of(render_scan(bodies, geometry, scan));
      CAPTURE(noise, blur, levels.other_peaks.size(), levels.air, levels.material);
      CHECK(levels.other_peaks.empty());
      CHECK(std::abs(levels.air - 20000) < 250);
      CHECK(std::abs(levels.material - 45000) < 250);
    }
  }
}

TEST_CASE("contrast-to-noise of 4 carries levels") {
  for (const double cnr : {4.0, 3.5}) {
    check_levels(levels_of(render_scan(rod(), phantoms::cube_geometry(96), scan_model(0.8, cnr, 0))), 20000,
                 45000, 25000 / cnr, 0.02);
  }
}

TEST_CASE("thin walls tell the level that they nowhere reach") {
  for (const double degrees : {0.0, 17.0}) {
    for (const double thickness : {4.0, 5.0, 7.0, 10.0}) {
      for (const double blur : {0.7, 1.0}) {
        const SolidPtr plate = moved(box({12, 12, 48 - thickness / 2}, {84, 84, 48 + thickness / 2}),
                                     rotation_about({1, 0.4, 0.1}, degrees), {48, 48, 48}, {0.1, 0.2, 0.3});
        const GreyLevels levels =
            levels_of(render_scan({{plate, 1}}, phantoms::cube_geometry(96), scan_model(blur, 15, 0)));
        const double off = (levels.material - 45000) / 25000;
        CAPTURE(degrees, thickness, blur, levels.blur_voxel, off,
                levels.threshold_standard_uncertainty / 25000);
        CHECK(std::abs(off) < 0.01);
        CHECK(std::abs(levels.threshold - 32500) < 2 * levels.threshold_standard_uncertainty);
        CHECK(std::abs(levels.blur_voxel / blur - 1) < 0.06);
      }
    }
  }
}

TEST_CASE("walls too thin for the blur to tell their level get a warning and a wide uncertainty") {
  const SolidPtr plate = box({12, 12, 45.8}, {84, 84, 49.8});
  const GreyLevels levels =
      levels_of(render_scan({{plate, 1}}, phantoms::cube_geometry(96), scan_model(1.5, 15, 0)));
  CAPTURE(levels.material, levels.threshold_standard_uncertainty / 25000);
  CHECK_FALSE(levels.warnings.empty());
  CHECK(levels.threshold_standard_uncertainty > 0.03 * 25000);
}
