// An inspector's exclusions of findings, each with a reason, by name and time; never silent.
//
// {"dispositions_version": 1, "dispositions": [
//   {"position_mm": [x, y, z], "tolerance_mm": 0.2, "reason": "...", "by": "...", "when": "2026-01-31"}]}
#pragma once

#include <filesystem>
#include <string>
#include <vector>

#include "io/vec3.h"

namespace halfmark {

struct Disposition {
  Vec3 position_mm{};            // of the pore it means (ids may change between runs)
  double tolerance_mm = 0;       // > 0: how far that pore's centre may lie from position_mm
  std::string reason, by, when;  // none empty
};

// Throws Problem(input_missing, bad_data): which entry, what is wrong.
std::vector<Disposition> read_dispositions(const std::filesystem::path& file);
std::string dispositions_to_json(const std::vector<Disposition>& dispositions);

}  // namespace halfmark
