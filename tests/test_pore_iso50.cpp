// Pores by one global threshold: the independent counts of the real volume, ITK's component labels, and small
// volumes made by hand.
#include <itkConnectedComponentImageFilter.h>
#include <tbb/global_control.h>

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <vector>

#include "analysis/pore_iso50.h"
#include "tests/support/catch.h"
#include "tests/support/cement.h"
#include "tests/support/label_images.h"

using namespace halfmark;
using namespace halfmark::tests;

namespace {

GreyLevels levels_of(double air, double material) {
  GreyLevels levels;
  levels.air = air;
  levels.material = material;
  levels.threshold = (air + material) / 2;
  levels.air_noise = levels.material_noise = 1;
  levels.blur_voxel = 0.8;
  return levels;
}

PartMap whole_part(const VolumeGeometry& geometry) {
  PartMap part;
  part.inside = full_mask(geometry.size);
  part.has_outside = false;
  return part;
}

FieldOfView whole(const VolumeGeometry& geometry) {
  FieldOfView field;
  field.rows = full_mask(geometry.size);
  field.voxels = geometry.voxel_count();
  return field;
}

SegmentedPores iso50_of(const MemoryVolume& volume, const GreyLevels& levels, std::int64_t min_voxels) {
  PoreSpec spec;
  spec.method = PoreMethod::iso50;
  spec.min_voxels = min_voxels;
  return segment_pores_iso50(volume, whole(volume.geometry()), levels, whole_part(volume.geometry()), spec);
}

std::vector<std::int64_t> itk_component_sizes(const MemoryVolume& volume, double threshold) {
  const auto& n = volume.geometry().size;
  const std::uint8_t* voxels = volume.voxels<std::uint8_t>();
  const auto air =
      label_image(labels_of(n, [&](std::int64_t x, std::int64_t y,
                                   std::int64_t z) { return voxels[(z * n[1] + y) * n[0] + x] < threshold; }),
                  {1, 1, 1});
  const auto filter = itk::ConnectedComponentImageFilter<LabelImage, LabelImage>::New();
  filter->SetInput(air);
  filter->FullyConnectedOn();
  filter->Update();
  std::vector<std::int64_t> sizes(filter->GetObjectCount(), 0);
  const std::uint32_t* label = filter->GetOutput()->GetBufferPointer();
  for (std::int64_t i = 0; i < volume.geometry().voxel_count(); ++i) {
    if (label[i] > 0) ++sizes[label[i] - 1];
  }
  std::sort(sizes.rbegin(), sizes.rend());
  return sizes;
}

}  // namespace

TEST_CASE("the real volume has the independent counts of its 26-connected air") {
  const auto volume = cement_volume();
  if (!volume) {
    WARN("skipped: ../shared/real_volumes is not there");
    return;
  }
  const GreyLevels levels = levels_of(31, 101);
  REQUIRE(levels.threshold == 66);
  const SegmentedPores all = iso50_of(*volume, levels, 1);
  const auto at_least = [&](std::int64_t n) {
    return std::count_if(all.pores.begin(), all.pores.end(), [&](const Pore& p) { return p.voxels >= n; });
  };
  // Source: that folder's README (SciPy, 26-connected, grey < 66).
  CHECK(all.pores.size() == 1695);
  CHECK(at_least(8) == 1205);
  CHECK(at_least(27) == 897);
  CHECK(at_least(64) == 657);
  CHECK(all.pores[0].voxels == 19016);
  CHECK(std::count_if(all.pores.begin(), all.pores.end(), [](const Pore& p) { return p.cut_by_field; }) ==
        411);
  std::int64_t air = 0;
  for (const Pore& p : all.pores) air += p.voxels;
  const double porosity =
      100.0 * static_cast<double>(air) / static_cast<double>(volume->geometry().voxel_count());
  CAPTURE(porosity);
  CHECK(std::abs(porosity - 12.35) < 0.005);

  CHECK(iso50_of(*volume, levels, 27).pores.size() == 897);

  std::vector<std::int64_t> sizes;
  for (const Pore& p : all.pores) sizes.push_back(p.voxels);
  CHECK(std::is_sorted(sizes.rbegin(), sizes.rend()));
  CHECK(sizes == itk_component_sizes(*volume, levels.threshold));
}

TEST_CASE("pores of a volume made by hand: flags, centre, volume, greys, order") {
  VolumeGeometry geometry;
  geometry.size = {12, 10, 8};
  geometry.spacing_mm = {0.5, 0.5, 1.0};
  geometry.origin_mm = {10, 20, 30};
  MemoryVolume volume(geometry, VoxelType::i16);
  std::int16_t* voxels = volume.voxels<std::int16_t>();
  std::fill_n(voxels, geometry.voxel_count(), std::int16_t{100});
  const auto set = [&](std::int64_t x, std::int64_t y, std::int64_t z, std::int16_t grey) {
    voxels[(z * geometry.size[1] + y) * geometry.size[0] + x] = grey;
  };
  for (std::int64_t z = 2; z < 4; ++z) {  // 2x2x2, closed
    for (std::int64_t y = 3; y < 5; ++y) {
      for (std::int64_t x = 4; x < 6; ++x) set(x, y, z, static_cast<std::int16_t>(z == 2 ? 0 : 20));
    }
  }
  set(0, 8, 6, 49);                                    // at the border of the field, three voxels
  set(1, 8, 6, 0), set(2, 9, 7, 0);                    // joined across a corner
  set(8, 5, 5, 0), set(9, 5, 5, 0), set(10, 5, 5, 0);  // open, as many voxels; comes first
  set(6, 1, 1, 50);                                    // at the threshold: material
  FieldOfView field = whole(geometry);
  PartMap part = whole_part(geometry);
  part.has_outside = true;
  part.inside = mask_of(geometry.size, [](auto x, auto, auto) { return x < 10; });
  part.open_air = mask_of(geometry.size, [](auto x, auto y, auto z) { return x == 9 && y == 5 && z == 5; });
  PoreSpec spec;
  spec.min_voxels = 2;
  const SegmentedPores found = segment_pores_iso50(volume, field, levels_of(0, 100), part, spec);

  REQUIRE(found.pores.size() == 3);
  const Pore& cube = found.pores[0];
  CHECK(cube.id == 1);
  CHECK(cube.voxels == 8);
  CHECK(cube.kind == PoreKind::closed);
  CHECK(cube.volume_mm3.value == Approx(8 * 0.25));
  CHECK(cube.centre_mm[0] == Approx(10 + 4.5 * 0.5));
  CHECK(cube.centre_mm[1] == Approx(20 + 3.5 * 0.5));
  CHECK(cube.centre_mm[2] == Approx(30 + 2.5 * 1.0));
  CHECK(cube.mean_grey == Approx(10));
  CHECK(cube.contrast == Approx(1));
  CHECK(cube.min_index == std::array<std::int32_t, 3>{4, 3, 2});
  CHECK(cube.max_index == std::array<std::int32_t, 3>{5, 4, 3});
  CHECK(cube.volume_mm3.standard_uncertainty > 0);

  const Pore& cut = found.pores[1];  // three voxels
  CHECK(cut.kind == PoreKind::cut_by_field);
  CHECK(cut.voxels == 3);
  CHECK(cut.cut_by_field);
  CHECK_FALSE(cut.open);
  CHECK(cut.mean_grey == Approx(49.0 / 3));

  const Pore& open = found.pores[2];  // two voxels: the third lies outside the part
  CHECK(open.kind == PoreKind::open);
  CHECK(open.voxels == 2);
  CHECK_FALSE(open.cut_by_field);

  CHECK(found.field.labels.voxel_count() == 13);
  CHECK(found.field.fraction == std::vector<std::int16_t>(13, PoreField::unit));
}

TEST_CASE("pores of equal size come by their first voxel, whatever the thread count") {
  VolumeGeometry geometry;
  geometry.size = {40, 40, 40};
  MemoryVolume volume(geometry, VoxelType::u8);
  std::uint8_t* voxels = volume.voxels<std::uint8_t>();
  std::uint32_t state = 7;  // seed
  for (std::int64_t i = 0; i < geometry.voxel_count(); ++i) {
    state = state * 1664525u + 1013904223u;
    voxels[i] = (state >> 24) < 26 ? 0 : 200;
  }
  const GreyLevels levels = levels_of(0, 200);
  const SegmentedPores two = iso50_of(volume, levels, 1);
  const tbb::global_control one_thread(tbb::global_control::max_allowed_parallelism, 1);
  const SegmentedPores one = iso50_of(volume, levels, 1);
  REQUIRE(one.pores.size() == two.pores.size());
  REQUIRE(one.pores.size() > 500);
  for (std::size_t i = 0; i < one.pores.size(); ++i) {
    REQUIRE(one.pores[i].centre_mm == two.pores[i].centre_mm);
    REQUIRE(one.pores[i].mean_grey == two.pores[i].mean_grey);
    if (i == 0 || one.pores[i].voxels != one.pores[i - 1].voxels) continue;
    const auto first_voxel = [&](std::int32_t id) {
      std::int64_t at = 0;
      for (std::int64_t z = 0; z < 40; ++z) {
        for (std::int64_t y = 0; y < 40; ++y) {
          for (const LabelRun& r : one.field.labels.row(y, z)) {
            if (r.label == id) return (z * 40 + y) * 40 + r.begin;
          }
        }
      }
      return at;
    };
    if (i < 60) REQUIRE(first_voxel(one.pores[i - 1].id) < first_voxel(one.pores[i].id));
  }
}

TEST_CASE("nothing to find gives no pores") {
  VolumeGeometry geometry;
  geometry.size = {5, 4, 3};
  MemoryVolume volume(geometry, VoxelType::f32);
  std::fill_n(volume.voxels<float>(), geometry.voxel_count(), 1.0F);
  const SegmentedPores found = iso50_of(volume, levels_of(0, 1), 1);
  CHECK(found.pores.empty());
  CHECK(found.field.labels.empty());
}
