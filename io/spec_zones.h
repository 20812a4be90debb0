// The zones of an inspection spec, a part of its reader (inspection_spec.cpp).
#pragma once

#include <filesystem>
#include <vector>

#include "io/inspection_spec.h"

namespace halfmark {

class JsonObject;

// Reads the key `zones` of the spec `object`, if it has one, into spec.zones. Mesh files are looked for in
// `folder`. What is wrong goes to `problems`.
void read_spec_zones(JsonObject& object, const std::filesystem::path& folder,
                     std::vector<SpecProblem>& problems, InspectionSpec& spec);

}  // namespace halfmark
