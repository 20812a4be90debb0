// result.json: everything, with a schema (result.schema.json); and back.
#pragma once

#include <filesystem>
#include <string>

#include "analysis/inspection_result.h"

namespace halfmark {

std::string result_to_json(const Inspection& inspection, bool timestamp = false);
// Throws Problem(bad_data, input_missing).
Inspection read_result(const std::filesystem::path& result_json);

}  // namespace halfmark
