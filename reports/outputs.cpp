#include "reports/outputs.h"

#include "io/output_file.h"
#include "reports/pore_table_csv.h"
#include "reports/report_json.h"

namespace halfmark {

void write_outputs(const InspectionRun& run, const VolumeSource&, const std::filesystem::path& folder,
                   const OutputOptions& options, const RunControl& control) {
  OutputSet outputs;
  outputs.make_folder(folder);
  control.step("report", 0);
  outputs.write(folder / "result.json", result_to_json(run.inspection, options.timestamp));
  outputs.write(folder / "pores.csv", pores_to_csv(run.inspection, options.csv_semicolon));
  outputs.commit();
  control.step("report", 1);
}

}  // namespace halfmark
