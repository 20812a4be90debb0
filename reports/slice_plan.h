// Which slice shows a deciding place best, and how much of it.
#pragma once

#include <optional>

#include "analysis/inspection.h"
#include "reports/evidence_places.h"
#include "reports/slice_reading.h"

namespace halfmark {

struct SlicePlan {
  SliceWindow detail, overview;
  Vec3 index{};                    // the middle of the picture's place, voxels
  Vec3 half_mm{};                  // half of the frame around it along the voxel axes
  Vec3 wall_from_index{};          // a wall's near side ...
  std::optional<Vec3> wall_index;  // ... and its far side, for a line across it
  bool has_overview = true;
};

SlicePlan plan_slice(const InspectionRun& run, const VolumeGeometry& geometry, const EvidencePlace& place);

}  // namespace halfmark
