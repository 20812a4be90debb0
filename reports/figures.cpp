#include "reports/figures.h"

#include "reports/chart_figure.h"
#include "reports/part_figure.h"

namespace halfmark {

ReportFigures make_figures(const InspectionRun& run, const VolumeSource& volume, const RunControl& control) {
  ReportFigures figures;
  figures.places = evidence_places(run.inspection);
  std::vector<EvidencePlace> pictured = figures.places;
  if (pictured.size() > most_pictured_places) pictured.resize(most_pictured_places);
  control.step("report", 0.05);
  figures.slices = slice_figures(run, volume, pictured, control);
  control.step("report", 0.4);
  figures.part = part_figure(run, volume.geometry(), figures.places, control);
  control.step("report", 0.6);
  figures.walls = wall_figure(run, figures.places, control);
  control.step("report", 0.75);
  figures.pore_sizes = pore_size_figure(run.inspection);
  figures.grey_values = grey_histogram_figure(run.inspection);
  control.step("report", 0.8);
  return figures;
}

}  // namespace halfmark
