// Every picture of a report, made once and shared by report.html and report.pdf.
#pragma once

#include <vector>

#include "analysis/inspection.h"
#include "reports/evidence_places.h"
#include "reports/picture.h"
#include "reports/slice_figure.h"

namespace halfmark {

struct ReportFigures {
  std::vector<EvidencePlace> places;
  std::vector<PlaceFigures> slices;             // of the first places, at most most_pictured_places
  Figure part, walls, pore_sizes, grey_values;  // empty where there is nothing to show
};

// A report with more pictures than this is not looked through.
constexpr std::size_t most_pictured_places = 12;

// Works without a display. Reports progress as step "report" from 0 to 0.8; tests cancel between pictures.
ReportFigures make_figures(const InspectionRun& run, const VolumeSource& volume,
                           const RunControl& control = {});

}  // namespace halfmark
