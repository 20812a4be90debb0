// Where the field of view ends.
#pragma once

#include <span>

#include "analysis/run_mask.h"

namespace halfmark {

// True where voxels of the run [begin, end) of row (y, z) have a 6-neighbour beyond the field of view.
bool reaches_border(const Run& run, std::int64_t y, std::int64_t z, const RunMask& field);

}  // namespace halfmark
