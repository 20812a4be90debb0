// A solid as a scanner would show it: exact partial volumes, Gaussian blur, cupping, rings, noise from a
// seed. The noise of a voxel depends on seed and voxel index only, so that slabs rendered apart fit together.
#pragma once

#include <cstdint>
#include <memory>
#include <vector>

#include "analysis/solids.h"
#include "io/memory_volume.h"
#include "io/run_control.h"

namespace halfmark {

struct ScanModel {
  double air_grey = 8000, material_grey = 40000;
  double blur_voxel = 0.8;  // Gaussian sigma beside voxel averaging, in voxels of VolumeGeometry::voxel_mm()
  double noise_grey = 0;    // standard deviation of a voxel after correlation
  double noise_correlation_voxel = 0;  // Gaussian sigma of the noise's own smoothing; 0: white
  double cupping = 0;            // material level falls by this share of the contrast from rim to centre,
                                 // quadratically in the distance from the z axis through the volume's middle,
                                 // reaching full height at half of the smaller lateral width of the volume
  double ring_grey = 0;          // amplitude of ring artefacts about that axis
  double padding_radius_mm = 0;  // > 0: constant padding_grey outside this radius about that axis
  double padding_grey = 0;
  std::uint64_t seed = 1;
  VoxelType type = VoxelType::u16;  // integers are rounded and clipped to the type's range
};

struct ScannedBody {
  SolidPtr body;
  double grey_share = 1;  // 1: material_grey, 0: air_grey, 1.5: denser; later bodies replace earlier ones
};

// A volume source that renders planes on demand. Works for volumes larger than memory.
std::unique_ptr<VolumeSource> scan_of(std::vector<ScannedBody> bodies, const VolumeGeometry& geometry,
                                      const ScanModel& scan);
// The same, rendered into memory on all cores.
MemoryVolume render_scan(const std::vector<ScannedBody>& bodies, const VolumeGeometry& geometry,
                         const ScanModel& scan, const RunControl& control = {});

}  // namespace halfmark
