#include "reports/outputs.h"

#include <chrono>
#include <ctime>

#include "io/output_file.h"
#include "io/problem.h"
#include "reports/extra_outputs.h"
#include "reports/figures.h"
#include "reports/pore_table_csv.h"
#include "reports/report_content.h"
#include "reports/report_html.h"
#include "reports/report_json.h"
#include "reports/report_pdf.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

std::string today() {
  const std::time_t now = std::chrono::system_clock::to_time_t(std::chrono::system_clock::now());
  std::tm utc{};
  gmtime_r(&now, &utc);
  char text[32];
  std::strftime(text, sizeof text, "%Y-%m-%d %H:%M UTC", &utc);
  return text;
}

void write_reports(const InspectionRun& run, const VolumeSource& volume, const fs::path& folder,
                   const OutputOptions& options, OutputSet& outputs, const RunControl& control) {
  const ReportFigures figures = make_figures(run, volume, control);
  const ReportContent content = report_content(run, figures, options.timestamp ? today() : "");
  if (options.html) outputs.write(folder / "report.html", report_to_html(content));
  control.step("report", 0.85);
  if (options.pdf) outputs.write(folder / "report.pdf", report_to_pdf(content, control));
  control.step("report", 0.95);
}

}  // namespace

void write_outputs(const InspectionRun& run, const VolumeSource& volume, const fs::path& folder,
                   const OutputOptions& options, const RunControl& control) {
  check_extra_names(options.write);
  OutputSet outputs;
  outputs.make_folder(folder);
  control.step("report", 0);
  outputs.write(folder / "result.json", result_to_json(run.inspection, options.timestamp));
  outputs.write(folder / "pores.csv", pores_to_csv(run.inspection, options.csv_semicolon));
  if (options.html || options.pdf) write_reports(run, volume, folder, options, outputs, control);
  write_extras(run, volume.geometry(), folder, options.write, outputs, control);
  control.throw_if_cancelled();
  outputs.commit();
  remove_stale_extras(folder, options.write);
  control.step("report", 1);
}

}  // namespace halfmark
