// The voxels at or above a grey value, as runs.
#pragma once

#include "analysis/field_of_view.h"
#include "analysis/run_mask.h"
#include "io/run_control.h"
#include "io/volume_source.h"

namespace halfmark {

// Voxels of the field of view with grey >= threshold. NaN counts as below.
RunMask voxels_at_or_above(const VolumeSource& source, const FieldOfView& field, double threshold,
                           const RunControl& control = {});

}  // namespace halfmark
