#include "io/json_object.h"

#include <algorithm>
#include <cmath>

namespace halfmark {

namespace {

const char* kind_of(const nlohmann::json& value) {
  switch (value.type()) {
    case nlohmann::json::value_t::object:
      return "an object";
    case nlohmann::json::value_t::array:
      return "a list";
    case nlohmann::json::value_t::string:
      return "a text";
    case nlohmann::json::value_t::boolean:
      return "true or false";
    case nlohmann::json::value_t::null:
      return "null";
    default:
      return "a number";
  }
}

// Levenshtein distance, with the swap of two neighbours as one step.
std::size_t edit_distance(const std::string& a, const std::string& b) {
  std::vector<std::vector<std::size_t>> d(a.size() + 1, std::vector<std::size_t>(b.size() + 1));
  for (std::size_t i = 0; i <= a.size(); ++i) {
    for (std::size_t j = 0; j <= b.size(); ++j) {
      if (i == 0 || j == 0) {
        d[i][j] = i + j;
        continue;
      }
      d[i][j] =
          std::min({d[i - 1][j] + 1, d[i][j - 1] + 1, d[i - 1][j - 1] + (a[i - 1] == b[j - 1] ? 0 : 1)});
      if (i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1])
        d[i][j] = std::min(d[i][j], d[i - 2][j - 2] + 1);
    }
  }
  return d[a.size()][b.size()];
}

const nlohmann::json& empty_object() {
  static const nlohmann::json empty = nlohmann::json::object();
  return empty;
}

}  // namespace

std::string nearest_word(const std::string& word, const std::vector<std::string>& candidates) {
  if (word.size() > 64) return "";
  std::string best;
  std::size_t least = std::max<std::size_t>(2, word.size() / 3) + 1;
  for (const std::string& candidate : candidates) {
    // A word that is the beginning of another ("maximum" for "max") is near too.
    const bool begins = word.size() >= 3 && candidate.size() >= 3 &&
                        (word.rfind(candidate, 0) == 0 || candidate.rfind(word, 0) == 0);
    const std::size_t distance = begins ? 1 : edit_distance(word, candidate);
    if (distance < least) {
      least = distance;
      best = candidate;
    }
  }
  return best;
}

std::string suggestion(const std::string& word, const std::vector<std::string>& candidates) {
  const std::string best = nearest_word(word, candidates);
  if (!best.empty()) return "; did you mean '" + best + "'?";
  std::string list;
  for (const std::string& candidate : candidates) list += (list.empty() ? "" : ", ") + candidate;
  return "; possible: " + list;
}

JsonObject::JsonObject(const nlohmann::json& value, std::string place, std::vector<SpecProblem>& problems)
    : value_(value.is_object() ? value : empty_object()), place_(std::move(place)), problems_(problems) {
  if (!value.is_object())
    problems_.push_back(
        {place_.empty() ? "file" : place_, std::string("must be an object, not ") + kind_of(value)});
}

void JsonObject::allow(const std::vector<std::string>& keys, const std::vector<std::string>& reserved) {
  for (const auto& [key, value] : value_.items()) {
    if (problems_.size() >= most_spec_problems) return;
    if (std::find(keys.begin(), keys.end(), key) != keys.end()) continue;
    if (std::find(reserved.begin(), reserved.end(), key) != reserved.end()) {
      problem(key, "is not supported by this version");
    } else {
      problem(key, "unknown key '" + key + "'" + suggestion(key, keys));
    }
  }
}

std::string JsonObject::text(const std::string& key, const std::string& otherwise) {
  if (!has(key)) return otherwise;
  if (!raw(key).is_string()) {
    problem(key, std::string("must be a text, not ") + kind_of(raw(key)));
    return otherwise;
  }
  return raw(key).get<std::string>();
}

std::string JsonObject::required_text(const std::string& key) {
  if (!has(key)) problem(key, "is missing");
  const std::string out = text(key);
  if (has(key) && raw(key).is_string() && out.empty()) problem(key, "must not be empty");
  return out;
}

std::optional<double> JsonObject::number(const std::string& key) {
  if (!has(key)) return std::nullopt;
  if (!raw(key).is_number()) {
    problem(key, std::string("must be a number, not ") + kind_of(raw(key)));
    return std::nullopt;
  }
  const double value = raw(key).get<double>();
  if (!std::isfinite(value)) {
    problem(key, "must be a finite number");
    return std::nullopt;
  }
  return value;
}

double JsonObject::number_above(const std::string& key, double otherwise, double bound, bool bound_allowed) {
  const auto value = number(key);
  if (!value) return otherwise;
  if (*value > bound || (bound_allowed && *value == bound)) return *value;
  char text[60];
  std::snprintf(text, sizeof text, "must be %s %g", bound_allowed ? "at least" : "above", bound);
  problem(key, text);
  return otherwise;
}

bool JsonObject::flag(const std::string& key, bool otherwise) {
  if (!has(key)) return otherwise;
  if (!raw(key).is_boolean()) {
    problem(key, std::string("must be true or false, not ") + kind_of(raw(key)));
    return otherwise;
  }
  return raw(key).get<bool>();
}

bool JsonObject::is_list_up_to(const std::string& key, std::size_t entries) {
  if (!has(key) || !raw(key).is_array()) return false;
  if (raw(key).size() <= entries) return true;
  problem(key, "has more than " + std::to_string(entries) + " entries");
  return false;
}

std::optional<Vec3> JsonObject::point(const std::string& key) {
  if (!has(key)) {
    problem(key, "is missing");
    return std::nullopt;
  }
  const auto& list = raw(key);
  const bool sound =
      list.is_array() && list.size() == 3 && std::all_of(list.begin(), list.end(), [](const auto& v) {
        return v.is_number() && std::isfinite(v.template get<double>());
      });
  if (!sound) {
    problem(key, "must be three numbers in mm: [x, y, z]");
    return std::nullopt;
  }
  return Vec3{list[0].get<double>(), list[1].get<double>(), list[2].get<double>()};
}

std::string JsonObject::choice(const std::string& key, const std::string& otherwise,
                               const std::vector<std::string>& choices,
                               const std::vector<std::string>& reserved) {
  const std::size_t before = problems_.size();
  const std::string value = text(key, otherwise);
  if (problems_.size() != before || std::find(choices.begin(), choices.end(), value) != choices.end())
    return value;
  if (std::find(reserved.begin(), reserved.end(), value) != reserved.end()) {
    problem(key, "'" + value + "' is not supported by this version");
  } else {
    problem(key, "unknown '" + value + "'" + suggestion(value, choices));
  }
  return otherwise;
}

}  // namespace halfmark
