// The share of each voxel that a solid fills: exact partial volumes from signed distances.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/solids.h"
#include "io/volume_geometry.h"

namespace halfmark {

// Share in [0, 1] of a box-shaped cell that the solid fills. The cell is given by its centre and its three
// edge vectors (mm, at right angles). Where the surface within the cell is smooth, the share is the volume of
// the cell cut by the plane that the distances at the centre and at the six face centres give, its offset
// corrected by the surface's curvature; where the surface bends or has an edge, the cell is divided into
// eight, at most cell_divisions times. Summed over the voxels a ball touches, the error of its volume is
// below 0.05 % from 1.5 voxels radius, below 0.02 % from 3 voxels (tested).
double cell_coverage(const Solid& solid, const Vec3& centre_mm, const std::array<Vec3, 3>& edges_mm);

// Voxels a solid can touch: index ranges [begin, end) along x, y, z within the volume; empty if none.
struct VoxelReach {
  std::array<std::int64_t, 3> begin{}, end{};
};
VoxelReach voxel_reach(const SolidBounds& bounds, const VolumeGeometry& geometry);

// Lays the solid over the shares of row (y, z), shares[0 .. size[0]), for x in [reach.begin, reach.end):
// share = (1 - coverage) * share + coverage * body_share. Stretches without surface are passed over by the
// length of the distance.
void cover_row(const Solid& solid, const VoxelReach& reach, const VolumeGeometry& geometry, std::int64_t y,
               std::int64_t z, float body_share, std::vector<float>& shares);

}  // namespace halfmark
