// The share of each voxel that a solid fills.
#pragma once

#include <cstdint>
#include <vector>

#include "analysis/solids.h"
#include "io/volume_geometry.h"

namespace halfmark {

// Coverage in [0, 1] of the voxels x in [0, size[0]) of row (y, z), laid over shares[0 .. size[0]):
// share = (1 - coverage) * share + coverage * body_share.
//
// Voxels farther from the surface than half their diagonal are all or nothing, and whole stretches are passed
// over by the distance's own length. Others are sampled at subsamples^3 places, with a narrow
// linear ramp across the surface: for a plane this is right in the mean, for a ball of 1.5 voxels radius the
// volume is right to 0.15 %.
void cover_row(const Solid& solid, const SolidBounds& bounds, const VolumeGeometry& geometry, std::int64_t y,
               std::int64_t z, float body_share, std::vector<float>& shares);

}  // namespace halfmark
