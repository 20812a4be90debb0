// Slice pictures of the deciding places: a window around the place with the ISO-50 line, the pores' outlines,
// the place's frame and letter, a scale bar and axes; and the whole slice with that window.
#pragma once

#include <vector>

#include "analysis/inspection.h"
#include "reports/evidence_places.h"
#include "reports/picture.h"

namespace halfmark {

struct PlaceFigures {
  Figure detail, overview;  // overview's picture is empty when the window is almost the whole slice
};

// One entry a place, in order. Reads only the planes it needs, in one sweep.
std::vector<PlaceFigures> slice_figures(const InspectionRun& run, const VolumeSource& volume,
                                        const std::vector<EvidencePlace>& places,
                                        const RunControl& control = {});

}  // namespace halfmark
