// A finished inspection becomes files: result.json, pores.csv, report.html, report.pdf and, when asked,
// surface.stl, thickness.vtp, pores.vtp, labels.mha. All or none of them appear.
#pragma once

#include <filesystem>
#include <set>
#include <string>

#include "analysis/inspection.h"

namespace halfmark {

struct OutputOptions {
  std::set<std::string> write;  // of "surface", "thickness", "pores", "labels"
  bool csv_semicolon = false;   // ';' and decimal comma
  bool timestamp = false;       // a date in result.json and report.html
  bool pdf = true, html = true;
};

// Throws Problem(cannot_create, io_error); nothing half-written stays behind.
void write_outputs(const InspectionRun& run, const VolumeSource& volume, const std::filesystem::path& folder,
                   const OutputOptions& options = {}, const RunControl& control = {});

}  // namespace halfmark
