// The scan's blur from the part's own edges.
#pragma once

#include "analysis/field_of_view.h"
#include "analysis/sample_windows.h"

namespace halfmark {

struct BlurEstimate {
  double sigma_voxel = 0;  // Gaussian beside voxel averaging, in voxels of VolumeGeometry::voxel_mm()
  double standard_uncertainty = 0;  // voxels
  std::int64_t edges = 0;           // sound edges used
};

struct EdgeLevels {
  double air = 0, material = 0, noise = 0;
};

// At places of the ISO-50 surface an error function over the distance to a slightly curved local surface is
// fitted to the voxels around; its variance less that of voxel averaging (1/12 voxel^2 along the normal) is
// the blur's. The edge spread's width is the idea of ASTM E1695, taken on the part's own edges.
BlurEstimate estimate_blur(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field,
                           const EdgeLevels& levels);

}  // namespace halfmark
