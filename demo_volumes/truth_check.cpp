// Does a result agree with a demo part's truth?
#include <cmath>
#include <nlohmann/json.hpp>

#include "demo_volumes/demo_part.h"
#include "demo_volumes/part_builder.h"
#include "io/problem.h"

namespace halfmark {

namespace {

Json parsed(const std::string& text, const char* what) {
  Json json = Json::parse(text, nullptr, false);
  if (!json.is_object() || !json.contains("verdict") || !json.contains("requirements") ||
      !json["requirements"].is_array())
    throw Problem(ExitStatus::bad_data, std::string(what) + " is not a file of that kind");
  return json;
}

const Json* with_id(const Json& requirements, const Json& id) {
  for (const Json& entry : requirements) {
    if (entry.is_object() && entry.value("id", Json()) == id) return &entry;
  }
  return nullptr;
}

std::string requirement_difference(const Json& expected, const Json* found) {
  const std::string id = expected.value("id", "");
  if (found == nullptr) return id + ": missing in the result\n";
  const std::string verdict = found->value("verdict", "");
  if (verdict != expected.value("verdict", ""))
    return id + ": " + verdict + " where the truth says " + expected.value("verdict", "") + " (" +
           expected.value("reason", "") + ")\n";
  if (!expected.contains("tolerance")) return "";
  const Json measured = found->value("measured", Json());
  if (!measured.is_number()) return id + ": has no value\n";
  const double value = measured.get<double>(), truth = expected.value("value", 0.0),
               tolerance = expected.value("tolerance", 0.0);
  if (std::abs(value - truth) <= tolerance) return "";
  return id + ": measured " + in_words(value, 4, "") + ", the truth is " + in_words(truth, 4, "") +
         ", the difference more than " + in_words(tolerance, 4, "") + "\n";
}

}  // namespace

std::string compare_with_truth(const std::string& result_json, const std::string& truth_json) {
  const Json result = parsed(result_json, "the result"), truth = parsed(truth_json, "the truth");
  std::string differences;
  if (result["verdict"] != truth["verdict"])
    differences +=
        "verdict: " + result["verdict"].dump() + " where the truth says " + truth["verdict"].dump() + "\n";
  for (const Json& expected : truth["requirements"])
    differences +=
        requirement_difference(expected, with_id(result["requirements"], expected.value("id", Json())));
  return differences;
}

}  // namespace halfmark
