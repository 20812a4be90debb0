// Reads one JSON object key by key and notes every problem with its place instead of stopping at the first.
#pragma once

#include <nlohmann/json.hpp>
#include <optional>
#include <string>
#include <vector>

#include "io/inspection_spec.h"

namespace halfmark {

// Far beyond any drawing: entries of a list, and problems after which no more are looked for. They keep a
// hostile file from taking minutes.
constexpr std::size_t most_spec_entries = 1000, most_spec_problems = 1000;

class JsonObject {
 public:
  // `place`: where the object stands, "" for the whole file. A value that is no object is a problem.
  JsonObject(const nlohmann::json& value, std::string place, std::vector<SpecProblem>& problems);

  // Every other key is a problem; the nearest allowed one is suggested. Reserved keys belong to later
  // versions.
  void allow(const std::vector<std::string>& keys, const std::vector<std::string>& reserved = {});

  bool has(const std::string& key) const { return value_.is_object() && value_.contains(key); }
  const nlohmann::json& raw(const std::string& key) const { return value_.at(key); }
  // An empty key means the object itself.
  std::string place_of(const std::string& key) const {
    return place_.empty() || key.empty() ? place_ + key : place_ + "." + key;
  }
  const std::string& place() const { return place_; }

  std::string text(const std::string& key, const std::string& otherwise = "");
  std::string required_text(const std::string& key);
  std::optional<double> number(const std::string& key);  // finite
  double number_above(const std::string& key, double otherwise, double bound, bool bound_allowed);
  bool flag(const std::string& key, bool otherwise);
  // Whether there is a list of at most so many entries; a longer one is a problem, another type is not.
  bool is_list_up_to(const std::string& key, std::size_t entries);
  std::optional<Vec3> point(const std::string& key);
  // One of the choices; reserved ones are "not in this version".
  std::string choice(const std::string& key, const std::string& otherwise,
                     const std::vector<std::string>& choices, const std::vector<std::string>& reserved = {});
  void problem(const std::string& key, const std::string& sentence) const {
    problems_.push_back({place_of(key), sentence});
  }

 private:
  const nlohmann::json& value_;
  std::string place_;
  std::vector<SpecProblem>& problems_;
};

// The candidate that differs least from the word (edit distance), if it is near enough to be meant; else "".
std::string nearest_word(const std::string& word, const std::vector<std::string>& candidates);
// ": did you mean 'x'?" or a list of what there is.
std::string suggestion(const std::string& word, const std::vector<std::string>& candidates);

}  // namespace halfmark
