// Surface area of a set of voxels by Crofton's formula: the area is proportional to the mean number of times
// that straight lines enter the set, here along the 13 lines through a voxel and its 26 neighbours.
// Lehmann & Legland, "Efficient N-dimensional surface estimation using Crofton formula and run-length
// encoding", Insight Journal (2012). Voxel faces would overread a ball by half; this reads digitised balls of
// radius 2, 3, 5, 8 voxels low by 4.2, 1.8, 0.6, 0.1 %.
#pragma once

#include <array>
#include <span>

#include "analysis/pore_runs.h"
#include "io/vec3.h"

namespace halfmark {

// One of the 13 lines: an offset to a neighbouring voxel, its length, and the share of all directions that
// lie nearest to it (both ways together; the 13 weights sum to 1).
struct CroftonDirection {
  std::array<int, 3> step{};
  double length_mm = 0;
  double weight = 0;
};

// Weights are the areas of the Voronoi cells of the 26 directions on the unit sphere, for this spacing.
std::array<CroftonDirection, 13> crofton_directions(const Vec3& spacing_mm);

// mm^2. Runs ordered by z, then y, then x, not touching one another within a row.
double crofton_area_mm2(std::span<const VoxelRun> runs, const std::array<CroftonDirection, 13>& directions,
                        double voxel_volume_mm3);

}  // namespace halfmark
