#include "reports/json_value.h"

#include <algorithm>
#include <cmath>
#include <limits>

#include "io/problem.h"

namespace halfmark {

namespace {

std::string scalar_text(const Json& json) {
  return json.dump(-1, ' ', false, Json::error_handler_t::replace);
}

bool is_plain_list(const Json& json) {
  return json.is_array() &&
         std::none_of(json.begin(), json.end(), [](const Json& item) { return item.is_structured(); });
}

void print(const Json& json, int indent, std::string& out) {
  const std::string margin(static_cast<std::size_t>(indent), ' ');
  if (is_plain_list(json)) {
    out += "[";
    for (std::size_t i = 0; i < json.size(); ++i) out += (i ? ", " : "") + scalar_text(json[i]);
    out += "]";
  } else if (json.is_array()) {
    out += "[\n";
    for (std::size_t i = 0; i < json.size(); ++i) {
      out += margin + "  ";
      print(json[i], indent + 2, out);
      out += i + 1 < json.size() ? ",\n" : "\n";
    }
    out += margin + "]";
  } else if (json.is_object() && !json.empty()) {
    out += "{\n";
    for (auto member = json.begin(); member != json.end(); ++member) {
      if (member != json.begin()) out += ",\n";
      out += margin + "  " + scalar_text(Json(member.key())) + ": ";
      print(member.value(), indent + 2, out);
    }
    out += "\n" + margin + "}";
  } else {
    out += scalar_text(json);
  }
}

}  // namespace

std::string print_json(const Json& json) {
  std::string out;
  print(json, 0, out);
  out += "\n";
  return out;
}

Json to_json(const Vec3& v) { return Json::array({v[0], v[1], v[2]}); }

void put_measured(Json& object, const std::string& name, const std::string& unit, const Measured& m) {
  object[name + unit] = m.value;
  object[name + "_standard_uncertainty" + unit] = m.standard_uncertainty;
  if (m.contributions.empty()) return;
  Json parts = Json::array();
  for (const Contribution& c : m.contributions)
    parts.push_back({{"name", c.name}, {"standard_uncertainty", c.standard_uncertainty}});
  object[name + "_contributions" + unit] = std::move(parts);
}

void JsonPlace::fail(const std::string& what) const {
  throw Problem(ExitStatus::bad_data, file_ + ": " + (place_.empty() ? "" : place_ + ": ") + what +
                                          "; inspect the part again to get a sound result file");
}

JsonPlace JsonPlace::at(const std::string& key) const {
  const std::string below = place_.empty() ? key : place_ + "." + key;
  if (!json_.is_object() || !json_.contains(key)) JsonPlace(json_, file_, below).fail("is missing");
  return {json_.at(key), file_, below};
}

std::vector<JsonPlace> JsonPlace::items() const {
  if (!json_.is_array()) fail("should be a list");
  std::vector<JsonPlace> all;
  all.reserve(json_.size());
  for (std::size_t i = 0; i < json_.size(); ++i)
    all.emplace_back(json_[i], file_, place_ + "[" + std::to_string(i) + "]");
  return all;
}

double JsonPlace::number() const {
  if (json_.is_null()) return std::numeric_limits<double>::quiet_NaN();
  if (!json_.is_number()) fail("should be a number");
  return json_.get<double>();
}

std::int64_t JsonPlace::integer() const {
  if (json_.is_number_unsigned() && json_.get<std::uint64_t>() <= std::numeric_limits<std::int64_t>::max())
    return json_.get<std::int64_t>();
  if (!json_.is_number_integer() || json_.is_number_unsigned()) fail("should be a whole number");
  return json_.get<std::int64_t>();
}

bool JsonPlace::flag() const {
  if (!json_.is_boolean()) fail("should be true or false");
  return json_.get<bool>();
}

std::string JsonPlace::text() const {
  if (!json_.is_string()) fail("should be text");
  return json_.get<std::string>();
}

std::vector<std::string> JsonPlace::texts() const {
  std::vector<std::string> all;
  for (const JsonPlace& item : items()) all.push_back(item.text());
  return all;
}

std::vector<double> JsonPlace::numbers() const {
  std::vector<double> all;
  for (const JsonPlace& item : items()) all.push_back(item.number());
  return all;
}

Vec3 JsonPlace::vec3() const {
  const std::vector<double> all = numbers();
  if (all.size() != 3) fail("should be three numbers");
  return {all[0], all[1], all[2]};
}

Measured JsonPlace::measured(const std::string& name, const std::string& unit) const {
  Measured m;
  m.value = at(name + unit).number();
  m.standard_uncertainty = at(name + "_standard_uncertainty" + unit).number();
  const std::string parts = name + "_contributions" + unit;
  if (has(parts.c_str()))
    for (const JsonPlace& part : at(parts).items())
      m.contributions.push_back({part.at("name").text(), part.at("standard_uncertainty").number()});
  return m;
}

}  // namespace halfmark
