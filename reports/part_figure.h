// The part in three dimensions: glass-like with its pores solid in their verdicts' colours and the deciding
// places lettered; and the wall-thickness map.
#pragma once

#include <vector>

#include "analysis/inspection.h"
#include "reports/evidence_places.h"
#include "reports/picture.h"

namespace halfmark {

// Empty when there is no surface.
Figure part_figure(const InspectionRun& run, const VolumeGeometry& geometry,
                   const std::vector<EvidencePlace>& places, const RunControl& control = {});
// Two sides of the part; empty unless walls were measured.
Figure wall_figure(const InspectionRun& run, const std::vector<EvidencePlace>& places,
                   const RunControl& control = {});

}  // namespace halfmark
