// Helpers for tests on triangle meshes and the part they are taken from.
#pragma once

#include <algorithm>
#include <cstdint>
#include <utility>
#include <vector>

#include "analysis/part_map.h"
#include "analysis/surface.h"
#include "io/memory_volume.h"

namespace halfmark::meshes {

inline FieldOfView all_of(const VolumeGeometry& geometry) {
  FieldOfView field;
  field.rows = RunMask(geometry.size);
  for (std::int64_t r = 0; r < geometry.size[1] * geometry.size[2]; ++r) {
    field.rows.add_run({0, static_cast<std::int32_t>(geometry.size[0])});
    field.rows.end_row();
  }
  field.voxels = geometry.voxel_count();
  return field;
}

inline GreyLevels given_levels(double air, double material) {
  GreyLevels levels;
  levels.air = air;
  levels.material = material;
  levels.threshold = 0.5 * (air + material);
  return levels;
}

// Directed edges that do not occur once in each direction: 0 for a closed surface of consistent orientation.
inline std::size_t unmatched_edges(const TriangleMesh& mesh) {
  std::vector<std::pair<std::uint32_t, std::uint32_t>> forward, backward;
  for (const auto& t : mesh.triangles) {
    for (std::size_t c = 0; c < 3; ++c) {
      forward.emplace_back(t[c], t[(c + 1) % 3]);
      backward.emplace_back(t[(c + 1) % 3], t[c]);
    }
  }
  std::sort(forward.begin(), forward.end());
  std::sort(backward.begin(), backward.end());
  std::size_t unmatched = 0;
  for (std::size_t i = 0; i < forward.size(); ++i) {
    const bool twice = i > 0 && forward[i] == forward[i - 1];
    if (twice || !std::binary_search(backward.begin(), backward.end(), forward[i])) ++unmatched;
  }
  return unmatched;
}

}  // namespace halfmark::meshes
