// The voxels that carry a measurement: all, or those inside constant padding (often a cylinder's outside).
#pragma once

#include <optional>
#include <string>

#include "analysis/run_mask.h"
#include "io/run_control.h"
#include "io/volume_source.h"

namespace halfmark {

struct FieldOfView {
  RunMask rows;                        // at most one run a row
  std::optional<double> padding_grey;  // the constant left out, if any
  std::int64_t voxels = 0;             // in the field
  bool whole() const { return !padding_grey.has_value(); }
};

// Padding is a region of one exactly constant grey value that holds the corners or edges of the slices and
// has no noise.
FieldOfView find_field_of_view(const VolumeSource& source, const RunControl& control = {});
// The whole volume, without looking.
FieldOfView whole_field(const VolumeGeometry& geometry);

// All corners of the cube from the voxel less `margin` to the voxel plus `margin` lie in the field, whose
// planes are convex.
bool cube_in_field(const FieldOfView& field, std::int64_t x, std::int64_t y, std::int64_t z,
                   std::int64_t margin);

}  // namespace halfmark
