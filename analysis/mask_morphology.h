// Exact Euclidean distances up to a cap, by separable minimum of parabolas over a window of the cap's width.
// A slab job with a halo of the cap; slabs of plain rows cost almost nothing.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/run_mask.h"
#include "io/run_control.h"
#include "io/vec3.h"

namespace halfmark {

// Voxels of `mask` grown by a ball of radius_mm (centres within radius_mm of a centre in the mask), within
// the volume.
RunMask dilate(const RunMask& mask, double radius_mm, const Vec3& spacing_mm, const RunControl& control = {});
// Voxels of `mask` whose distance to the nearest voxel centre outside the mask exceeds radius_mm. What lies
// beyond the volume's border counts as in the mask when `border_inside`, else as outside.
RunMask erode(const RunMask& mask, double radius_mm, const Vec3& spacing_mm, bool border_inside,
              const RunControl& control = {});

RunMask complement(const RunMask& mask);
RunMask intersection(const RunMask& a, const RunMask& b);
RunMask union_of(const RunMask& a, const RunMask& b);
RunMask difference(const RunMask& a, const RunMask& b);

// Components of a mask, numbered from 1 in order of their first voxel (z, y, x). connectivity: 6, 18 or 26.
struct Components {
  RunLabels labels;
  std::int32_t count = 0;
};
Components connected_components(const RunMask& mask, int connectivity);

}  // namespace halfmark
