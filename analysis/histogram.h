// Counts of grey values over the field of view.
#pragma once

#include "analysis/grey_levels.h"

namespace halfmark {

// Integer voxels: one bin a grey value. Float voxels: 65,536 bins over the bulk of the values, what lies
// beyond in the end bins. Throws Problem(bad_data) for NaN and infinity, naming the first voxel and how many
// there are.
Histogram count_greys(const VolumeSource& source, const FieldOfView& field, const RunControl& control = {});

}  // namespace halfmark
