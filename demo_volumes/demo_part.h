// The demo parts: a volume, a spec and the truth about it, from a short description.
#pragma once

#include <string>
#include <vector>

#include "analysis/blurred_body.h"
#include "io/output_file.h"
#include "io/run_control.h"

namespace halfmark {

struct DemoPart {
  std::string name, sentence;  // "bracket", what it shows
  VolumeGeometry geometry;
  std::vector<ScannedBody> bodies;
  ScanModel scan;
  std::string spec_json, truth_json;  // truth: every pore's place and size, walls, the expected verdicts
};

std::vector<std::string> demo_names();
// Throws Problem(usage) for an unknown name, listing the known ones.
DemoPart demo_part(const std::string& name);
// Writes NAME.mha, NAME.spec.json and NAME.truth.json into `folder`.
void write_demo(const DemoPart& part, const std::filesystem::path& folder, const RunControl& control = {});

}  // namespace halfmark
