#include <CLI/CLI.hpp>
#include <cstdio>
#include <filesystem>

#include "analysis/inspection.h"
#include "cli/commands.h"
#include "cli/terminal.h"
#include "cli/volume_options.h"
#include "io/output_file.h"
#include "reports/outputs.h"
#include "reports/report_json.h"
#include "reports/verdict_text.h"

namespace halfmark {

namespace {

struct InspectArguments {
  VolumeArguments volume;
  std::string spec, folder, serial, dispositions, csv = "comma";
  std::vector<std::string> write;
  int body = 0, threads = 0;
  bool json = false, quiet = false, timestamp = false;
};

// Finds out before the long work whether the folder can be written to.
void try_output_folder(const std::filesystem::path& folder) {
  OutputSet trial;
  trial.make_folder(folder);
  trial.write(folder / "trial", "");
}

int status_of(Verdict verdict) {
  switch (verdict) {
    case Verdict::accept:
      return static_cast<int>(ExitStatus::accept);
    case Verdict::reject:
      return static_cast<int>(ExitStatus::reject);
    case Verdict::undecided:
      break;
  }
  return static_cast<int>(ExitStatus::undecided);
}

int run_inspect(const InspectArguments& arguments) {
  const RunControl control = terminal_control(arguments.quiet);
  const InspectionSpec spec = read_spec(arguments.spec);
  const OpenedVolume volume = open_from(arguments.volume, control);
  InspectOptions options;
  options.body = arguments.body;
  options.threads = arguments.threads;
  options.serial = arguments.serial;
  if (!arguments.dispositions.empty()) options.dispositions = read_dispositions(arguments.dispositions);
  try_output_folder(arguments.folder);
  options.volume_sha256 = sha256_of_files(volume.data_files, control);

  const InspectionRun run = inspect(volume, spec, options, control);
  OutputOptions outputs;
  outputs.write.insert(arguments.write.begin(), arguments.write.end());
  outputs.csv_semicolon = arguments.csv == "semicolon";
  outputs.timestamp = arguments.timestamp;
  write_outputs(run, *volume.source, arguments.folder, outputs, control);
  end_progress();
  if (arguments.json) {
    std::fputs(result_to_json(run.inspection, arguments.timestamp).c_str(), stdout);
  } else if (!arguments.quiet) {
    std::fputs(verdict_text(run.inspection).c_str(), stdout);
    std::printf("report: %s\n", (std::filesystem::path(arguments.folder) / "report.html").c_str());
  }
  return status_of(run.inspection.verdict);
}

}  // namespace

Command add_inspect(CLI::App& app) {
  auto arguments = std::make_shared<InspectArguments>();
  add_volume_options(app, arguments->volume);
  app.add_option("--spec", arguments->spec, "the inspection spec, a JSON file")->required();
  app.add_option("--out", arguments->folder,
                 "the folder for result.json, pores.csv, report.html and report.pdf")
      ->required();
  app.add_option("--serial", arguments->serial, "the part's serial number, shown in the report");
  app.add_option("--body", arguments->body, "which body of the volume, 1 is the largest (default)")
      ->check(CLI::PositiveNumber);
  app.add_option("--write", arguments->write,
                 "further files: surface (STL), thickness (VTP), pores (VTP), labels (MHA)")
      ->delimiter(',')
      ->check(CLI::IsMember({"surface", "thickness", "pores", "labels"}));
  app.add_option("--dispositions", arguments->dispositions,
                 "an inspector's exclusions with reasons, a JSON file");
  app.add_option("--csv", arguments->csv, "pores.csv for decimal comma: semicolon")
      ->check(CLI::IsMember({"comma", "semicolon"}));
  app.add_option("--threads", arguments->threads, "how many threads; default all cores")
      ->check(CLI::Range(1, 1024));
  app.add_flag("--timestamp", arguments->timestamp, "put the date into result.json and report.html");
  app.add_flag("--json", arguments->json, "print result.json instead of the verdict's text");
  app.add_flag("--quiet", arguments->quiet, "print nothing but problems");
  app.footer("Exit status: 0 accept, 1 reject, 2 undecided; see halfmark --help for the others.");
  return [arguments] { return run_inspect(*arguments); };
}

}  // namespace halfmark
