// Regions of lowered grey in a block: found as what they are, sized by what they lack, apart from pores.
#include <algorithm>
#include <cmath>
#include <numbers>

#include "analysis/pore_segmentation.h"
#include "tests/support/catch.h"
#include "tests/support/phantoms.h"

using namespace halfmark;

namespace {

SegmentedPores pores_of(const std::vector<ScannedBody>& bodies, const VolumeGeometry& geometry,
                        const ScanModel& scan, const PoreSpec& spec = {}) {
  const MemoryVolume volume = render_scan(bodies, geometry, scan);
  const FieldOfView field = find_field_of_view(volume);
  const GreyLevels levels = find_grey_levels(volume, field);
  const PartMap part = find_part(volume, field, levels, {6, 2, 0});
  const MaterialLevel level = fit_material_level(volume, field, levels, part);
  return segment_pores(volume, field, levels, part, level, spec);
}

ScanModel usual_scan() {
  ScanModel scan;
  scan.air_grey = 20000;
  scan.material_grey = 45000;
  scan.blur_voxel = 1;
  scan.noise_grey = 2500;  // contrast-to-noise 10
  scan.cupping = 0.08;
  return scan;
}

double ball_volume(double diameter) { return std::numbers::pi / 6 * diameter * diameter * diameter; }

std::int64_t number_of(const SegmentedPores& found, PoreKind kind) {
  return std::count_if(found.pores.begin(), found.pores.end(), [&](const Pore& p) { return p.kind == kind; });
}

}  // namespace

TEST_CASE("a cloud is one diffuse region of the volume that it lacks") {
  constexpr double across = 36;
  for (const double porosity : {0.04, 0.075, 0.12}) {
    const auto phantom = phantoms::balls_in_block(phantoms::cube_geometry(128), {across, 8, 5}, 8, 5);
    REQUIRE(phantom.balls.size() == 3);
    auto bodies = phantom.bodies;
    bodies[1].grey_share = 1 - porosity;
    const SegmentedPores found = pores_of(bodies, phantom.geometry, usual_scan());
    CAPTURE(porosity, found.pores.size(), found.smoothed_noise, found.seed_threshold);
    REQUIRE(number_of(found, PoreKind::diffuse) == 1);
    CHECK(number_of(found, PoreKind::closed) == 2);
    CHECK(found.pores.size() == 3);
    const auto cloud = std::find_if(found.pores.begin(), found.pores.end(),
                                    [](const Pore& p) { return p.kind == PoreKind::diffuse; });
    const double truth = porosity * ball_volume(across);
    const double off = length(cloud->centre_mm - phantom.balls[0].centre_mm);
    CAPTURE(cloud->volume_mm3.value, truth, cloud->volume_mm3.value - truth,
            cloud->volume_mm3.standard_uncertainty, off);
    // Half of the lowered grey within 6 voxels of the rim may fall below the region's low threshold.
    CHECK(std::abs(cloud->volume_mm3.value / truth - 1) < 0.1);
    CHECK(std::abs(cloud->volume_mm3.value - truth) < 3 * cloud->volume_mm3.standard_uncertainty);
    CHECK(off < 1.5);
    CHECK(cloud->contrast == Approx(porosity).margin(0.02));
  }
}

TEST_CASE("nothing is diffuse in a sound block, with cupping or with pores all over") {
  for (const double cupping : {0.0, 0.08}) {
    ScanModel scan = usual_scan();
    scan.cupping = cupping;
    std::vector<double> diameters(30, 6);
    diameters.insert(diameters.end(), 60, 3);
    const auto phantom = phantoms::balls_in_block(phantoms::cube_geometry(128), diameters, 5, 6);
    const SegmentedPores found = pores_of(phantom.bodies, phantom.geometry, scan);
    CAPTURE(cupping);
    CHECK(number_of(found, PoreKind::diffuse) == 0);
    CHECK(found.pores.size() == phantom.balls.size());
  }
}

TEST_CASE("pores too small to be listed are not called diffuse") {
  PoreSpec spec;
  spec.min_voxels = 500;
  std::vector<double> diameters(40, 6);
  const auto phantom = phantoms::balls_in_block(phantoms::cube_geometry(112), diameters, 4, 8);
  const SegmentedPores found = pores_of(phantom.bodies, phantom.geometry, usual_scan(), spec);
  CHECK(found.pores.empty());
}

TEST_CASE("a flat void is no diffuse region") {
  const auto geometry = phantoms::cube_geometry(112);
  const Vec3 middle{55.5, 55.5, 55.5};
  const std::vector<ScannedBody> bodies{
      {box(middle - Vec3{44, 44, 44}, middle + Vec3{44, 44, 44}), 1},
      {cylinder(middle - Vec3{0, 0, 0.25}, middle + Vec3{0, 0, 0.25}, 14), 0}};
  ScanModel scan = usual_scan();
  scan.noise_grey = 1250;
  const SegmentedPores found = pores_of(bodies, geometry, scan);
  REQUIRE(found.pores.size() == 1);
  CHECK(found.pores[0].kind == PoreKind::closed);
  const double truth = std::numbers::pi * 14 * 14 * 0.5;
  CAPTURE(found.pores[0].volume_mm3.value, truth);
  CHECK(found.pores[0].volume_mm3.value == Approx(truth).epsilon(0.1));
}
