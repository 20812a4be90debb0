// The demo parts: a volume, a spec and the truth about it, from a short description. One file a part:
// bracket.cpp, grille.cpp, sound_block.cpp, casting.cpp; they are put together by part_builder.h.
#pragma once

#include <cstdint>
#include <filesystem>
#include <string>
#include <vector>

#include "analysis/blurred_body.h"
#include "io/output_file.h"
#include "io/run_control.h"

namespace halfmark {

struct DemoOptions {
  int scale = 1;                   // in [1, 16]: this many times as many voxels per mm
  std::int64_t edge_voxels = 256;  // in [64, 4096]: edge of the volume of "casting"; the others ignore it
};

struct DemoPart {
  std::string name, sentence;  // "bracket", what it shows
  VolumeGeometry geometry;
  std::vector<ScannedBody> bodies;
  ScanModel scan;
  std::string spec_json, truth_json;  // truth: every pore's place and size, walls, the expected verdicts
};

std::vector<std::string> demo_names();
std::string demo_sentence(const std::string& name);  // what it shows; throws as demo_part does
// Throws Problem(usage) for an unknown name, listing the known ones, and for options out of range.
DemoPart demo_part(const std::string& name, const DemoOptions& options = {});
// Writes NAME.mha, NAME.spec.json and NAME.truth.json into `folder`; the volume is rendered and written slab
// by slab. Throws Problem(cannot_create, io_error).
void write_demo(const DemoPart& part, const std::filesystem::path& folder, const RunControl& control = {});

// Where a result.json differs from what a truth.json expects (verdicts, values and the number of findings),
// one sentence a line; empty when it agrees. Throws Problem(bad_data) for text that is not such a file.
std::string compare_with_truth(const std::string& result_json, const std::string& truth_json);

}  // namespace halfmark
