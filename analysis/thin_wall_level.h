// Material level and blur of a part that has thin walls only. Nowhere does its grey value reach a plateau, so
// that the histogram's mode lies below the material's level and the edges look sharper than they are.
//
// Across a wall, whose two faces are parallel there, the scan shows air + (level - air) (Phi(z) - Phi(z - T /
// s)), z the distance from the near face over the edge width s, T the thickness (Treece et al. 2010 model
// thin walls so). Level, thickness, place, tilt and edge width are fitted to the voxels around many places;
// the level is the median over the sound fits, the blur their edge width less voxel averaging (1/12 voxel^2
// along the normal).
#pragma once

#include "analysis/blur_estimate.h"

namespace halfmark {

struct ThinWallLevel {
  double material = 0;              // grey value
  double standard_uncertainty = 0;  // of it, grey values
  double sigma_voxel = 0;           // blur, voxels of VolumeGeometry::voxel_mm()
  double sigma_standard_uncertainty = 0;
  std::int64_t walls = 0;  // sound fits; 0: none, nothing else is set
};

// levels.material: a first estimate, at most a third of the contrast low.
ThinWallLevel estimate_thin_walls(const VolumeSource& source, const SampleWindows& windows,
                                  const FieldOfView& field, const EdgeLevels& levels);

}  // namespace halfmark
