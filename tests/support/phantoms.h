// Phantoms that several tests share: balls in a slightly turned block.
#pragma once

#include <cmath>
#include <cstdint>
#include <random>
#include <vector>

#include "analysis/blurred_body.h"

namespace halfmark::phantoms {

inline VolumeGeometry cube_geometry(std::int64_t edge_voxels, const Vec3& spacing_mm = {1, 1, 1}) {
  VolumeGeometry geometry;
  geometry.size = {edge_voxels, edge_voxels, edge_voxels};
  geometry.spacing_mm = spacing_mm;
  return geometry;
}

// Uniform numbers in [0, 1) that are the same with every standard library.
class Uniform {
 public:
  explicit Uniform(std::uint64_t seed) : engine_(seed) {}
  double operator()() { return static_cast<double>(engine_() >> 11) / 9007199254740992.0; }
  double operator()(double low, double high) { return low + (high - low) * (*this)(); }

 private:
  std::mt19937_64 engine_;
};

inline std::array<double, 9> slight_turn() {
  const auto a = rotation_about({1, 0, 0}, 3.7), b = rotation_about({0.3, 1, 0.2}, 5.3);
  std::array<double, 9> out{};
  for (std::size_t i = 0; i < 3; ++i) {
    for (std::size_t j = 0; j < 3; ++j) {
      for (std::size_t k = 0; k < 3; ++k) out[3 * i + j] += a[3 * i + k] * b[3 * k + j];
    }
  }
  return out;
}

struct Ball {
  Vec3 centre_mm{};
  double diameter_mm = 0;
};

struct BallPhantom {
  VolumeGeometry geometry;
  std::vector<ScannedBody> bodies;  // the block, then each ball as air
  std::vector<Ball> balls;
  SolidPtr block;
  double block_volume_mm3 = 0;
};

// Balls of the given diameters (mm, placed in that order; put large ones first) at random places of a block
// that is `share` of the volume's edge wide and slightly turned; each at least gap_mm from the others and
// from the faces. Balls that find no place after many tries are left out.
inline BallPhantom balls_in_block(const VolumeGeometry& geometry, const std::vector<double>& diameters_mm,
                                  double gap_mm, std::uint64_t seed, double share = 0.8) {
  BallPhantom out;
  out.geometry = geometry;
  const Vec3 first = geometry.index_to_mm({0, 0, 0});
  const Vec3 last = geometry.index_to_mm({static_cast<double>(geometry.size[0] - 1),
                                          static_cast<double>(geometry.size[1] - 1),
                                          static_cast<double>(geometry.size[2] - 1)});
  const Vec3 middle = 0.5 * (first + last), half = (0.5 * share) * (last - first);
  const auto turn = slight_turn();
  out.block =
      moved(box(middle - half, middle + half), turn, middle,
            {0.31 * geometry.spacing_mm[0], 0.17 * geometry.spacing_mm[1], 0.43 * geometry.spacing_mm[2]});
  out.block_volume_mm3 = 8 * half[0] * half[1] * half[2];
  out.bodies.push_back({out.block, 1});
  Uniform random(seed);
  for (const double diameter : diameters_mm) {
    for (int attempt = 0; attempt < 4000; ++attempt) {
      const Vec3 p =
          middle + Vec3{random(-half[0], half[0]), random(-half[1], half[1]), random(-half[2], half[2])};
      if (out.block->signed_distance_mm(p) > -(0.5 * diameter + gap_mm)) continue;
      bool free = true;
      for (const Ball& ball : out.balls)
        free = free && length(ball.centre_mm - p) > 0.5 * (ball.diameter_mm + diameter) + gap_mm;
      if (!free) continue;
      out.balls.push_back({p, diameter});
      out.bodies.push_back({sphere(p, 0.5 * diameter), 0});
      break;
    }
  }
  return out;
}

}  // namespace halfmark::phantoms
