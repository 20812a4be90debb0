// JSON values with their place, so that every complaint about a result file names where it is; and a printer
// that keeps plain lists on one line. Used by report_json only.
#pragma once

#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <vector>

#include "analysis/measured.h"
#include "io/vec3.h"

namespace halfmark {

using Json = nlohmann::ordered_json;

// Objects indented by two, lists of plain values on one line, numbers with the fewest digits that read back
// the same, NaN and infinity as null, bytes that are not UTF-8 replaced.
std::string print_json(const Json& json);

Json to_json(const Vec3& v);
// NAME, NAME_standard_uncertainty and, where kept, NAME_contributions; `unit` ends each name: "_mm3".
void put_measured(Json& object, const std::string& name, const std::string& unit, const Measured& m);

// One value of a file that is being read. Throws Problem(bad_data) naming file and place.
class JsonPlace {
 public:
  JsonPlace(const Json& json, std::string file, std::string place = "")
      : json_(json), file_(std::move(file)), place_(std::move(place)) {}

  bool has(const char* key) const {
    return json_.is_object() && json_.contains(key) && !json_.at(key).is_null();
  }
  JsonPlace at(const std::string& key) const;
  std::vector<JsonPlace> items() const;  // of a list
  const Json& json() const { return json_; }

  double number() const;  // null is NaN
  std::int64_t integer() const;
  bool flag() const;
  std::string text() const;
  std::vector<std::string> texts() const;
  std::vector<double> numbers() const;
  Vec3 vec3() const;
  Measured measured(const std::string& name, const std::string& unit) const;
  // The member of a list of names that the text equals.
  template <class E, std::size_t N>
  E one_of(const E (&values)[N]) const {
    const std::string word = text();
    for (const E value : values)
      if (word == to_text(value)) return value;
    fail("'" + word + "' is not a known word");
  }
  [[noreturn]] void fail(const std::string& what) const;

 private:
  const Json& json_;
  std::string file_, place_;
};

}  // namespace halfmark
