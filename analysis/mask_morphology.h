// Set algebra, balls and components on voxel masks kept as runs.
//
// Dilation and erosion by a ball are exact: squared Euclidean distances up to the ball's radius by a
// separable minimum of parabolas (Saito & Toriwaki 1994) over a window of the radius, tile by tile; tiles of
// plain inside or plain outside cost nothing. Distances are between voxel centres.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/run_mask.h"
#include "io/run_control.h"
#include "io/vec3.h"

namespace halfmark {

// Voxels within radius_mm (inclusive) of a voxel of the mask, within the volume.
RunMask dilate(const RunMask& mask, double radius_mm, const Vec3& spacing_mm, const RunControl& control = {});

// Voxels of the mask farther than radius_mm from every voxel outside the mask. What lies beyond the volume's
// border counts as inside the mask when `border_inside`, else as outside.
RunMask erode(const RunMask& mask, double radius_mm, const Vec3& spacing_mm, bool border_inside,
              const RunControl& control = {});

RunMask complement(const RunMask& mask);
RunMask intersection(const RunMask& a, const RunMask& b);
RunMask union_of(const RunMask& a, const RunMask& b);
RunMask difference(const RunMask& a, const RunMask& b);

// The mask in a volume that is larger by `margin` voxels on every side (negative: cropped).
RunMask padded(const RunMask& mask, std::int64_t margin);

// Components of a mask, numbered from 1 in order of their first voxel (z, then y, then x).
struct Components {
  RunLabels labels;
  std::int32_t count = 0;
};
// connectivity: 6, 18 or 26.
Components connected_components(const RunMask& mask, int connectivity);

// The voxels of the components whose flag (index: label) is not zero.
RunMask selected(const RunLabels& labels, const std::vector<std::uint8_t>& keep);

}  // namespace halfmark
