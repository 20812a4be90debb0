// Depth below the part's surface and gaps between pores against brute force and known lengths.
#include <algorithm>
#include <cmath>
#include <cstdint>
#include <vector>

#include "analysis/pore_shape.h"
#include "analysis/pore_spacing.h"
#include "analysis/run_grid.h"
#include "tests/support/catch.h"
#include "tests/support/digitised.h"

using namespace halfmark;
using namespace halfmark::tests;

namespace {

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
