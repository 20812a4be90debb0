// Places on the ISO-50 surface, for estimates from the grey values around them: blur, level of thin walls.
#pragma once

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <vector>

#include "analysis/sample_windows.h"
#include "io/vec3.h"

namespace halfmark {

struct Edge {
  std::int64_t x, y, z;
};

// Where rows along x cross the threshold upwards or downwards, likewise along y and z, on a grid of rows;
// `margin` voxels off the window's border.
template <class View>
void collect_edges(const View& view, double threshold, std::int64_t margin, std::vector<Edge>& edges) {
  const auto& size = view.size();
  constexpr std::int64_t rows_per_axis = 48;
  const auto step = [](std::int64_t n) { return std::max<std::int64_t>(1, n / rows_per_axis); };
  const std::int64_t planes = view.z_end() - view.z_begin();
  const auto look = [&](std::int64_t x, std::int64_t y, std::int64_t z, std::int64_t dx, std::int64_t dy,
                        std::int64_t dz) {
    if (!view.holds(x, y, z, margin)) return;
    if ((view(x, y, z) >= threshold) != (view(x + dx, y + dy, z + dz) >= threshold))
      edges.push_back({x, y, z});
  };
  const std::int64_t sx = step(size[0]), sy = step(size[1]), sz = step(planes);
  for (std::int64_t z = view.z_begin() + margin; z + margin < view.z_end(); z += sz) {
    for (std::int64_t y = margin; y + margin < size[1]; y += sy) {
      for (std::int64_t x = margin; x + margin < size[0]; ++x) look(x, y, z, 1, 0, 0);
    }
  }
  for (std::int64_t z = view.z_begin() + margin; z + margin < view.z_end(); z += sz) {
    for (std::int64_t y = margin; y + margin < size[1]; ++y) {
      for (std::int64_t x = margin; x + margin < size[0]; x += sx) look(x, y, z, 0, 1, 0);
    }
  }
  for (std::int64_t z = view.z_begin() + margin; z + margin < view.z_end(); ++z) {
    for (std::int64_t y = margin; y + margin < size[1]; y += sy) {
      for (std::int64_t x = margin; x + margin < size[0]; x += sx) look(x, y, z, 0, 0, 1);
    }
  }
}

// Gradient of the least-squares plane through the grey values within `half` voxels, per voxel of voxel_mm().
template <class View>
Vec3 local_gradient(const View& view, const Edge& e, const Vec3& scale, std::int64_t half) {
  Vec3 sum{0, 0, 0};
  for (std::int64_t z = -half; z <= half; ++z) {
    for (std::int64_t y = -half; y <= half; ++y) {
      for (std::int64_t x = -half; x <= half; ++x) {
        const double g = view(e.x + x, e.y + y, e.z + z);
        sum = sum + g * Vec3{static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)};
      }
    }
  }
  return {sum[0] / scale[0], sum[1] / scale[1], sum[2] / scale[2]};
}

// The normal and two directions across it, unit vectors.
struct LocalFrame {
  Vec3 n, u, v;
};

inline LocalFrame frame_along(const Vec3& gradient) {
  const Vec3 n = unit(gradient);
  const auto [u, v] = across(n);
  return {n, u, v};
}

}  // namespace halfmark
