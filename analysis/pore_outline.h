// Sub-voxel points of a pore's surface, for its calipers. The pore's share of each voxel (or, where only a
// label is known, 1 inside and 0 outside) is smoothed lightly, and the surface is put at the level that holds
// as many voxels as the label: so smoothing changes no volume. A digitised ball then shows about the same
// diameter in all directions, where bare voxels differ by one voxel between the axes and the diagonals.
// Next: calipers.h.
#pragma once

#include <cstdint>
#include <span>
#include <vector>

#include "analysis/pore_runs.h"
#include "io/vec3.h"

namespace halfmark {

// Shares of the voxels of one run, in PoreField::unit.
struct ShareRun {
  VoxelRun voxels;
  const std::int16_t* share = nullptr;
};

// Points where the surface crosses the lines between neighbouring voxel centres, mm along the voxel axes from
// voxel (0, 0, 0); those inside the hull of their plane are left out;
// and the label's outermost voxel centres, so that no thread of single voxels gets lost. label: not empty.
// shares: empty for a label alone. Labels whose box exceeds `outline_box_limit` voxels are outlined by their
// voxels' face centres instead: half a voxel matters little there.
std::vector<Vec3> outline_points(std::span<const VoxelRun> label, std::span<const ShareRun> shares,
                                 const Vec3& spacing_mm);

constexpr std::int64_t outline_box_limit = 4'000'000;

}  // namespace halfmark
