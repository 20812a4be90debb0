// Bodies cut into voxels, and the pores they make.
#pragma once

#include <array>
#include <cmath>
#include <cstdint>
#include <functional>
#include <numbers>
#include <random>
#include <vector>

#include "analysis/pore_runs.h"
#include "analysis/pore_shape.h"
#include "tests/support/label_runs.h"

namespace halfmark::tests {

constexpr double pi = std::numbers::pi;
using Inside = std::function<bool(const Vec3&)>;  // mm, about the origin

inline std::vector<VoxelRun> runs_of(const RunLabels& labels, std::int32_t label = 1) {
  const PoreRuns runs(labels, label);
  const auto of = runs.of(label);
  return {of.begin(), of.end()};
}

// A body about the middle of a cubic volume, moved by `shift` voxels.
inline RunLabels digitised(const Inside& body, std::int64_t edge, const Vec3& shift,
                           const Vec3& spacing = {1, 1, 1}) {
  const double middle = static_cast<double>(edge - 1) / 2;
  return labels_of({edge, edge, edge}, [&](auto x, auto y, auto z) {
    const Vec3 at{static_cast<double>(x) - middle - shift[0], static_cast<double>(y) - middle - shift[1],
                  static_cast<double>(z) - middle - shift[2]};
    return body({at[0] * spacing[0], at[1] * spacing[1], at[2] * spacing[2]}) ? 1 : 0;
  });
}

inline Inside ball(double radius) {
  return [=](const Vec3& p) { return length(p) <= radius; };
}

// Rows are the axes of a turned body.
using Rotation = std::array<Vec3, 3>;
inline Rotation random_rotation(std::mt19937& random) {
  std::normal_distribution<double> normal;
  const auto vector = [&] { return Vec3{normal(random), normal(random), normal(random)}; };
  const Vec3 a = vector(), b = vector();
  const Vec3 u = (1 / length(a)) * a;
  const Vec3 across = b - dot(b, u) * u;
  const Vec3 v = (1 / length(across)) * across;
  return {u, v, cross(u, v)};
}
inline Inside turned(const Inside& body, const Rotation& r) {
  return [=](const Vec3& p) { return body({dot(r[0], p), dot(r[1], p), dot(r[2], p)}); };
}

inline Vec3 random_shift(std::mt19937& random) {
  std::uniform_real_distribution<double> within(-0.5, 0.5);
  const double x = within(random), y = within(random);
  return {x, y, within(random)};
}

// As one pore whose label voxels are counted whole.
inline Pore described(const RunLabels& labels, const Vec3& spacing = {1, 1, 1}) {
  VolumeGeometry geometry;
  geometry.size = labels.size();
  geometry.spacing_mm = spacing;
  SegmentedPores found = pores_of(labels, geometry);
  PartMap part;
  part.has_outside = false;
  GreyLevels levels;
  levels.blur_voxel = 0.7;
  describe_pores(found, geometry, part, levels);
  return found.pores.at(0);
}

struct RandomPores {
  VolumeGeometry geometry;
  SegmentedPores found;
  PartMap part;
};

inline RandomPores random_pores(std::uint32_t seed, const Vec3& spacing, int count) {
  std::mt19937 random(seed);
  RandomPores out;
  const std::int64_t edge = 56;
  out.geometry.size = {edge, edge, edge};
  out.geometry.spacing_mm = spacing;
  std::uniform_real_distribution<double> place(14, 42), radius(1, 4.5);
  std::vector<std::array<double, 4>> balls;
  for (int i = 0; i < count; ++i) {
    const double x = place(random), y = place(random), z = place(random);
    balls.push_back({x, y, z, radius(random)});
  }
  const RunLabels labels = labels_of(out.geometry.size, [&](auto x, auto y, auto z) {
    for (int i = 0; i < count; ++i) {
      const auto& b = balls[static_cast<std::size_t>(i)];
      const double dx = static_cast<double>(x) - b[0], dy = static_cast<double>(y) - b[1],
                   dz = static_cast<double>(z) - b[2];
      if (dx * dx + dy * dy + dz * dz <= b[3] * b[3]) return i + 1;
    }
    return 0;
  });
  out.found = pores_of(labels, out.geometry);
  out.part.inside = mask_of(out.geometry.size, [&](auto x, auto y, auto z) {  // a turned block
    const double u = 0.8 * static_cast<double>(x - 28) + 0.6 * static_cast<double>(y - 28);
    const double v = -0.6 * static_cast<double>(x - 28) + 0.8 * static_cast<double>(y - 28);
    return std::abs(u) < 21 && std::abs(v) < 21 && z > 6 && z < 50;
  });
  return out;
}

}  // namespace halfmark::tests
