#include "io/spec_schema.h"

#include <algorithm>
#include <cmath>
#include <nlohmann/json.hpp>

#include "io/json_object.h"

// Without this, valijson ends the program where it could throw.
#define VALIJSON_USE_EXCEPTIONS 1
#include <valijson/adapters/nlohmann_json_adapter.hpp>
#include <valijson/schema.hpp>
#include <valijson/schema_parser.hpp>
#include <valijson/validation_results.hpp>
#include <valijson/validator.hpp>

namespace halfmark {

namespace {

using nlohmann::json;
using valijson::adapters::NlohmannJsonAdapter;

const valijson::Schema& schema() {
  static const valijson::Schema* parsed = [] {
    auto* out = new valijson::Schema;
    const json text = json::parse(spec_schema_text());
    valijson::SchemaParser(valijson::SchemaParser::kDraft7).populateSchema(NlohmannJsonAdapter(text), *out);
    return out;
  }();
  return *parsed;
}

// 8.0 is a whole number to JSON Schema, valijson tells it from 8.
json with_whole_numbers(json value) {
  constexpr double exact = 9007199254740992.0;  // 2^53: whole doubles below are exact as integers
  if (value.is_number_float()) {
    const double number = value.get<double>();
    if (number == std::floor(number) && std::abs(number) < exact) return static_cast<std::int64_t>(number);
  } else if (value.is_structured()) {
    for (json& member : value) member = with_whole_numbers(std::move(member));
  }
  return value;
}

// "<root>", "[zones]", "[1]", "[max_mm]" -> "zones[1] (rim).max_mm".
std::string place_of(const std::vector<std::string>& steps, const json& root) {
  std::string place;
  const json* at = &root;
  for (std::size_t i = 1; i < steps.size(); ++i) {
    const std::string name = steps[i].substr(1, steps[i].size() - 2);
    if (at == nullptr || !at->is_array()) {
      place += (place.empty() ? "" : ".") + name;
      at = at != nullptr && at->is_object() && at->contains(name) ? &(*at)[name] : nullptr;
      continue;
    }
    place += "[" + name + "]";
    const std::size_t index = std::stoul(name);
    at = index < at->size() ? &(*at)[index] : nullptr;
    if (i == 2 && at != nullptr && at->is_object() && at->contains("id") && (*at)["id"].is_string())
      place += " (" + (*at)["id"].get<std::string>() + ")";
  }
  return place;
}

std::string joined(const std::string& place, const std::string& key) {
  return place.empty() ? key : place + "." + key;
}

// The text between the first and the last quote, of "Missing required property 'max'."
std::string quoted(const std::string& text) {
  const std::size_t first =
      text.find("property '") != std::string::npos ? text.find("property '") + 9 : text.find(": '") + 2;
  const std::size_t last = text.rfind('\'');
  return last > first ? text.substr(first + 1, last - first - 1) : "";
}

bool begins(const std::string& text, const char* with) { return text.rfind(with, 0) == 0; }

// Says only that something further down or beside it is wrong.
bool is_wrapper(const std::string& description) {
  return begins(description, "Failed to validate item") ||
         begins(description, "Failed to validate against schema") ||
         begins(description, "Failed to validate against a conditional") ||
         begins(description, "Failed to validate against child");
}

SpecProblem to_problem(const valijson::ValidationResults::Error& error, const json& root) {
  SpecProblem out{place_of(error.context, root), "breaks the schema: " + error.description};
  if (begins(error.description, "Missing required")) {
    out = {joined(out.place, quoted(error.description)), "is missing, says the schema"};
  } else if (begins(error.description, "Object contains a property")) {
    const std::string key = quoted(error.description);
    out = {joined(out.place, key), "the schema knows no key '" + key + "' here"};
  } else if (begins(error.description, "Failed to match against any enum")) {
    out.sentence = "is none of the values the schema lists";
  } else if (begins(error.description, "Value type not permitted")) {
    out.sentence = "is of a type that the schema does not permit";
  } else if (is_wrapper(error.description)) {
    out.sentence = "breaks the schema";
  }
  return out;
}

// Whether `place` is `above` itself or a part of it.
bool lies_in(const std::string& place, const std::string& above) {
  if (above.empty() || above == "file" || place == above) return true;
  return place.size() > above.size() && begins(place, above.c_str()) &&
         std::string(".[ ").find(place[above.size()]) != std::string::npos;
}

}  // namespace

std::vector<SpecProblem> schema_problems(const json& spec) {
  const json root = with_whole_numbers(spec);
  valijson::ValidationResults results;
  valijson::Validator validator;
  if (validator.validate(schema(), NlohmannJsonAdapter(root), &results)) return {};
  std::vector<SpecProblem> found, wrappers;
  valijson::ValidationResults::Error error;
  while (results.popError(error) && found.size() + wrappers.size() < most_spec_problems)
    (is_wrapper(error.description) ? wrappers : found).push_back(to_problem(error, root));
  for (const SpecProblem& wrapper : wrappers) {
    const bool explained = std::any_of(found.begin(), found.end(),
                                       [&](const SpecProblem& p) { return lies_in(p.place, wrapper.place); });
    if (!explained) found.push_back(wrapper);
  }
  for (SpecProblem& p : found) p.place = p.place.empty() ? "file" : p.place;
  if (found.empty()) found.push_back({"file", "breaks the schema"});
  return found;
}

void add_unnamed(std::vector<SpecProblem>& problems, const std::vector<SpecProblem>& found) {
  const std::size_t named = problems.size();
  for (const SpecProblem& p : found) {
    const bool known = std::any_of(problems.begin(), problems.begin() + static_cast<std::ptrdiff_t>(named),
                                   [&](const SpecProblem& reader) {
                                     return lies_in(p.place, reader.place) || lies_in(reader.place, p.place);
                                   });
    if (!known) problems.push_back(p);
  }
}

}  // namespace halfmark
