// Where the voxels of a volume lie. Axis order is x (fastest), y, z everywhere; the centre of voxel (i,j,k)
// lies at origin_mm + direction * ((i,j,k) * spacing_mm).
#pragma once

#include <array>
#include <cstdint>

#include "io/vec3.h"

namespace halfmark {

struct VolumeGeometry {
  std::array<std::int64_t, 3> size{0, 0, 0};                   // voxels along x, y, z, each >= 1
  Vec3 spacing_mm{1, 1, 1};                                    // each finite and > 0
  Vec3 origin_mm{0, 0, 0};                                     // centre of voxel (0,0,0)
  std::array<double, 9> direction{1, 0, 0, 0, 1, 0, 0, 0, 1};  // row-major, orthonormal

  std::int64_t voxels_per_plane() const { return size[0] * size[1]; }
  std::int64_t voxel_count() const { return size[0] * size[1] * size[2]; }
  double voxel_volume_mm3() const { return spacing_mm[0] * spacing_mm[1] * spacing_mm[2]; }
  // Edge of the cube with the voxel's volume, mm: what "one voxel" means as a length.
  double voxel_mm() const { return std::cbrt(voxel_volume_mm3()); }

  Vec3 index_to_mm(const Vec3& index) const {
    const Vec3 s{index[0] * spacing_mm[0], index[1] * spacing_mm[1], index[2] * spacing_mm[2]};
    const auto& d = direction;
    return {origin_mm[0] + d[0] * s[0] + d[1] * s[1] + d[2] * s[2],
            origin_mm[1] + d[3] * s[0] + d[4] * s[1] + d[5] * s[2],
            origin_mm[2] + d[6] * s[0] + d[7] * s[1] + d[8] * s[2]};
  }
  Vec3 mm_to_index(const Vec3& mm) const {
    const Vec3 p = mm - origin_mm;
    const auto& d = direction;
    return {(d[0] * p[0] + d[3] * p[1] + d[6] * p[2]) / spacing_mm[0],
            (d[1] * p[0] + d[4] * p[1] + d[7] * p[2]) / spacing_mm[1],
            (d[2] * p[0] + d[5] * p[1] + d[8] * p[2]) / spacing_mm[2]};
  }
};

}  // namespace halfmark
