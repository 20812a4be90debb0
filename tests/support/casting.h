// A casting that benchmarks share: a housing with ribs, bosses, bores and gas pores. Made voxel by voxel from
// signed distances, as quickly as 512^3 voxels ask for; where exact partial volumes matter, render_scan() is
// the one to use.
#pragma once

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>

#include "tests/support/phantoms.h"

namespace halfmark::phantoms {

// Its bounding box takes three quarters of a cube of `edge` voxels of 1 mm.
inline SolidPtr housing(std::int64_t edge) {
  const double e = static_cast<double>(edge);
  const auto p = [e](double x, double y, double z) { return Vec3{x * e, y * e, z * e}; };
  std::vector<SolidPtr> solid{subtracted(box(p(0.08, 0.08, 0.08), p(0.92, 0.92, 0.88)),
                                         {box(p(0.12, 0.12, 0.12), p(0.88, 0.88, 0.95))})};
  for (const double t : {0.29, 0.5, 0.71}) {
    solid.push_back(box(p(t - 0.01, 0.1, 0.1), p(t + 0.01, 0.9, 0.55)));
    solid.push_back(box(p(0.1, t - 0.015, 0.1), p(0.9, t + 0.015, 0.4)));
  }
  std::vector<SolidPtr> bores;
  for (const double x : {0.2, 0.5, 0.8}) {
    for (const double y : {0.25, 0.75}) {
      solid.push_back(cylinder(p(x, y, 0.1), p(x, y, 0.8), 0.07 * e));
      bores.push_back(cylinder(p(x, y, 0.0), p(x, y, 0.95), 0.03 * e));
    }
  }
  return moved(subtracted(united(solid), bores), slight_turn(), p(0.5, 0.5, 0.5), {0.3, 0.1, 0.2});
}

inline std::vector<Ball> casting_pores(const Solid& body, std::int64_t edge, int count) {
  std::vector<Ball> pores;
  Uniform random(23);
  const double low = 0.1 * static_cast<double>(edge), high = 0.9 * static_cast<double>(edge);
  for (int attempt = 0; attempt < 200 * count && static_cast<int>(pores.size()) < count; ++attempt) {
    const Ball ball{{random(low, high), random(low, high), random(low, high)}, random(3, 12)};
    if (body.signed_distance_mm(ball.centre_mm) < -(0.5 * ball.diameter_mm + 3)) pores.push_back(ball);
  }
  return pores;
}

// 16-bit, air 8000, material 40000, Gaussian edges of width sigma, white noise.
inline MemoryVolume casting(std::int64_t edge, double sigma = 0.85, double noise = 2000,
                            int pore_count = 400) {
  constexpr std::int64_t cube = 8;  // cubes of voxels far from the surface need one distance only
  const SolidPtr body = housing(edge);
  const std::vector<Ball> pores = casting_pores(*body, edge, pore_count);
  MemoryVolume volume(cube_geometry(edge), VoxelType::u16);
  const std::int64_t cubes = (edge + cube - 1) / cube;
  tbb::parallel_for(std::int64_t{0}, cubes, [&](std::int64_t cz) {
    for (std::int64_t i = 0; i < cubes * cubes; ++i) {
      const std::array<std::int64_t, 3> first{i % cubes * cube, i / cubes * cube, cz * cube};
      const auto at = [](std::int64_t v) { return static_cast<double>(v); };
      const Vec3 middle{at(first[0]) + 3.5, at(first[1]) + 3.5, at(first[2]) + 3.5};
      const double reach = 6.1 + 5 * sigma, far = body->signed_distance_mm(middle);
      std::vector<Ball> near;
      for (const Ball& b : pores) {
        if (length(b.centre_mm - middle) < 0.5 * b.diameter_mm + reach) near.push_back(b);
      }
      for (std::int64_t z = first[2]; z < std::min(first[2] + cube, edge); ++z) {
        for (std::int64_t y = first[1]; y < std::min(first[1] + cube, edge); ++y) {
          for (std::int64_t x = first[0]; x < std::min(first[0] + cube, edge); ++x) {
            const Vec3 p{at(x), at(y), at(z)};
            double d = std::abs(far) > reach ? far : body->signed_distance_mm(p);
            for (const Ball& b : near) d = std::max(d, 0.5 * b.diameter_mm - length(p - b.centre_mm));
            const std::int64_t voxel = (z * edge + y) * edge + x;
            // Noise from the voxel's number (splitmix64): the sum of four 16-bit numbers is nearly normal.
            std::uint64_t h = static_cast<std::uint64_t>(voxel) * 0x9E3779B97F4A7C15ULL + 7;
            h = (h ^ (h >> 30)) * 0xBF58476D1CE4E5B9ULL;
            h = (h ^ (h >> 27)) * 0x94D049BB133111EBULL;
            h ^= h >> 31;
            const double sum = at(static_cast<std::int64_t>((h & 0xFFFF) + (h >> 16 & 0xFFFF) +
                                                            (h >> 32 & 0xFFFF) + (h >> 48)));
            const double normal = (sum / 65536 - 2) * std::sqrt(3.0);
            const double share = 0.5 * std::erfc(d / (sigma * std::sqrt(2.0)));
            volume.voxels<std::uint16_t>()[voxel] =
                static_cast<std::uint16_t>(std::lround(8000 + 32000 * share + noise * normal));
          }
        }
      }
    }
  });
  return volume;
}

}  // namespace halfmark::phantoms
