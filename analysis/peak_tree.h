// Candidates become pores: each peak of the smoothed deficit grows to half of its own height.
#pragma once

#include <cstdint>
#include <vector>

#include "analysis/pore_candidates.h"

namespace halfmark {

struct GrownPores {
  std::vector<std::int32_t> label;  // per candidate voxel, in the mask's order: 0 none, else a pore from 1
  std::vector<float> peak;          // per pore (index: label), capped at 1; [0] unused
  std::int32_t count = 0;
};

// Voxels are taken in falling order of the smoothed deficit. A voxel beside no earlier one starts a peak; one
// beside peaks that have not yet fallen to half of their height (capped at 1) joins them to one pore; one
// beside finished peaks only is their tail. A peak that meets a finished one's tail stays a pore of its own
// if it stands out from the meeting level by the seed threshold, else it is a bump of that tail. (A merge
// tree with persistence, as in Edelsbrunner, Letscher & Zomorodian 2002, with half-height growth.)
GrownPores grow_pores(const PoreCandidates& candidates, const RunControl& control);

}  // namespace halfmark
