// The inspection spec's JSON Schema (spec.schema.json, draft 7) and what it says of a spec: a second line of
// checks, independent of the reader in inspection_spec.cpp. The reader knows what a schema cannot say; the
// schema is what editors and other programs go by, so the two must agree on the rest.
#pragma once

#include <nlohmann/json_fwd.hpp>
#include <string>
#include <vector>

#include "io/inspection_spec.h"

namespace halfmark {

// The bytes of spec.schema.json, part of the program.
const char* spec_schema_text();

// What breaks the schema, by places as the reader writes them; empty when the spec fits it.
std::vector<SpecProblem> schema_problems(const nlohmann::json& spec);

// Adds those of `found` whose place the reader has not named, neither itself nor anything above or below it.
void add_unnamed(std::vector<SpecProblem>& problems, const std::vector<SpecProblem>& found);

// What the reader alone finds; check_spec_text is this and the schema.
std::vector<SpecProblem> reader_problems(const std::string& json_text, const std::filesystem::path& folder);

}  // namespace halfmark
