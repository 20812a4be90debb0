// The spec's JSON Schema and the reader, two independent judges, agree on everything a schema can say.
#include <algorithm>
#include <fstream>
#include <iterator>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "demo_volumes/demo_part.h"
#include "io/inspection_spec.h"
#include "io/problem.h"
#include "io/spec_schema.h"
#include "tests/support/catch.h"

using namespace halfmark;

namespace {

std::string lines(const std::vector<SpecProblem>& problems) {
  std::string out;
  for (const SpecProblem& p : problems) out += p.place + ": " + p.sentence + "\n";
  return out;
}

std::vector<SpecProblem> by_schema(const std::string& text) {
  return schema_problems(nlohmann::json::parse(text));
}

std::string with_zone(const std::string& zone) {
  return R"({"spec_version": 1, "zones": [)" + zone +
         R"(], "requirements": [{"id": "R1", "zone": "part", "quantity": "porosity", "max": 1}]})";
}
std::string with_requirement(const std::string& requirement) {
  return R"({"spec_version": 1, "requirements": [)" + requirement + "]}";
}
std::string with_key(const std::string& key) {
  return R"({"spec_version": 1, )" + key +
         R"(, "requirements": [{"id": "R1", "zone": "part", "quantity": "porosity", "max": 1}]})";
}

struct Case {
  bool sound;
  std::string text;
};

std::vector<Case> corpus() {
  return {
      // sound
      {true, with_key(R"("title": "Bracket")")},
      {true, with_key(R"("$schema": "./spec.schema.json")")},
      {true,
       R"({"spec_version": 1.0, "requirements": [{"id": "a", "zone": "part", "quantity": "porosity", "max": 0}]})"},
      {true, with_key(R"("part": {"name": "p", "customer_order": ""})")},
      {true, with_key(R"("part": {})")},
      {true, with_key(R"("grey_levels": {"air": "auto", "material": 41000.5})")},
      {true, with_key(R"("grey_levels": {"air": -1000, "material": "auto"})")},
      {true, with_key(R"("surface": {})")},
      {true, with_key(R"("pores": {"method": "iso50", "min_voxels": 27.0, "open_min_depth_mm": 0})")},
      {true, with_key(R"("wall_thickness": {"max_mm": 1e6, "pores_split_walls": true})")},
      {true, with_key(R"("decision": {"rule": "simple"})")},
      {true, with_key(R"("decision": {"conformance_probability": 0.999})")},
      {true, with_zone(R"({"id": "a", "shape": "everything"})")},
      {true,
       with_zone(
           R"({"id": "a", "shape": "box", "min_mm": [0, 0, 0], "max_mm": [1, 1, 1], "use": "exclude"})")},
      {true,
       with_zone(
           R"({"id": "a", "shape": "cylinder", "from_mm": [0, 0, 0], "to_mm": [0, 0, 2], "radius_mm": 1})")},
      {true, with_zone(R"({"id": "a", "shape": "sphere", "centre_mm": [0, -2, 1e3], "radius_mm": 0.001})")},
      {true, with_zone(R"({"id": "a", "shape": "skin", "depth_mm": 1.5})")},
      {true, with_zone(R"({"id": "a", "shape": "skin", "depth_mm": [0, 1.5]})")},
      {true, with_zone(R"({"id": "a", "shape": "union", "of": ["b"]}, {"id": "b", "shape": "everything"})")},
      {true,
       with_requirement(R"({"id": "R", "zone": "part", "quantity": "wall_thickness", "min": 1, "max": 2})")},
      {true,
       with_requirement(
           R"({"id": "R", "zone": "part", "quantity": "local_porosity", "max": 2, "reference": {"size_mm": 3}})")},
      {true,
       with_requirement(
           R"({"id": "R", "zone": "part", "quantity": "section_porosity", "max": 2, "axis": "y", "window_mm": 4})")},
      // broken
      {false, "[]"},
      {false, "null"},
      {false, "{}"},
      {false, R"({"spec_version": 1})"},
      {false, R"({"spec_version": 1, "requirements": []})"},
      {false, R"({"spec_version": 1, "requirements": {}})"},
      {false, R"({"spec_version": 1, "requirements": [null]})"},
      {false, R"({"spec_version": 1, "requirements": [[[{}]]]})"},
      {false, R"({"requirements": [{"id": "R", "zone": "part", "quantity": "porosity", "max": 1}]})"},
      {false,
       R"({"spec_version": "1", "requirements": [{"id": "R", "zone": "part", "quantity": "porosity", "max": 1}]})"},
      {false,
       R"({"spec_version": 2, "requirements": [{"id": "R", "zone": "part", "quantity": "porosity", "max": 1}]})"},
      {false, with_key(R"("titel": "Bracket")")},
      {false, with_key(R"("alignment": {})")},
      {false, with_key(R"("$schema": 7)")},
      {false, with_key(R"("title": null)")},
      {false, with_key(R"("title": ["x"])")},
      {false, with_key(R"("part": "bracket")")},
      {false, with_key(R"("part": {"name": 4})")},
      {false, with_key(R"("part": {"colour": "red"})")},
      {false, with_key(R"("grey_levels": {"air": "dark"})")},
      {false, with_key(R"("grey_levels": {"air": [1]})")},
      {false, with_key(R"("surface": {"method": "local"})")},
      {false, with_key(R"("pores": {"min_voxels": 0})")},
      {false, with_key(R"("pores": {"min_voxels": 8.5})")},
      {false, with_key(R"("pores": {"min_voxels": 1e300})")},
      {false, with_key(R"("pores": {"open_closing_radius_mm": 0})")},
      {false, with_key(R"("pores": {"open_min_depth_mm": -0.1})")},
      {false, with_key(R"("pores": {"inclusions": "yes"})")},
      {false, with_key(R"("wall_thickness": {"max_mm": -1})")},
      {false, with_key(R"("wall_thickness": {"method": "opposite_surface"})")},
      {false, with_key(R"("decision": {"rule": "lenient"})")},
      {false, with_key(R"("decision": {"coverage_factor": 0})")},
      {false, with_key(R"("decision": {"conformance_probability": 0.5})")},
      {false, with_key(R"("decision": {"coverage_factor": 2, "conformance_probability": 0.9})")},
      {false, with_key(R"("zones": {})")},
      {false, with_zone("7")},
      {false, with_zone(R"({"shape": "everything"})")},
      {false, with_zone(R"({"id": "", "shape": "everything"})")},
      {false, with_zone(R"({"id": "a"})")},
      {false, with_zone(R"({"id": "a", "shape": "wall_band"})")},
      {false, with_zone(R"({"id": "a", "shape": "bxo", "min_mm": [0, 0, 0], "max_mm": [1, 1, 1]})")},
      {false, with_zone(R"({"id": "a", "shape": "box", "min_mm": [0, 0], "max_mm": [1, 1, 1]})")},
      {false, with_zone(R"({"id": "a", "shape": "box", "max_mm": [1, 1, 1]})")},
      {false, with_zone(R"({"id": "a", "shape": "box", "min_mm": [0, 0, "0"], "max_mm": [1, 1, 1]})")},
      {false, with_zone(R"({"id": "a", "shape": "everything", "radius_mm": 1})")},
      {false, with_zone(R"({"id": "a", "shape": "cylinder", "from_mm": [0, 0, 0], "to_mm": [0, 0, 2]})")},
      {false, with_zone(R"({"id": "a", "shape": "sphere", "centre_mm": null, "radius_mm": 1})")},
      {false, with_zone(R"({"id": "a", "shape": "skin", "depth_mm": [1]})")},
      {false, with_zone(R"({"id": "a", "shape": "skin", "depth_mm": [-1, 1]})")},
      {false, with_zone(R"({"id": "a", "shape": "skin", "depth_mm": 0})")},
      {false, with_zone(R"({"id": "a", "shape": "mesh", "file": ""})")},
      {false, with_zone(R"({"id": "a", "shape": "union", "of": []})")},
      {false, with_zone(R"({"id": "a", "shape": "union", "of": [1]})")},
      {false, with_zone(R"({"id": "a", "shape": "everything", "use": "ignore"})")},
      {false, with_requirement(R"({"id": "R", "zone": "part", "quantity": "porosity"})")},
      {false, with_requirement(R"({"id": "R", "zone": "part", "quantity": "porosity", "max": -1})")},
      {false, with_requirement(R"({"id": "R", "zone": "part", "quantity": "porosity", "max": null})")},
      {false, with_requirement(R"({"id": "R", "zone": "part", "quantity": "dimension", "max": 1})")},
      {false, with_requirement(R"({"id": "R", "quantity": "porosity", "max": 1})")},
      {false, with_requirement(R"({"id": "R", "zone": "part", "quantity": "local_porosity", "max": 1})")},
      {false,
       with_requirement(
           R"({"id": "R", "zone": "part", "quantity": "local_porosity", "max": 1, "reference": {"shape": "cube"}})")},
      {false, with_requirement(
                  R"({"id": "R", "zone": "part", "quantity": "section_porosity", "max": 1, "axis": 2})")},
      {false,
       with_requirement(
           R"({"id": "R", "zone": "part", "quantity": "wall_thickness", "min": 1, "percentile": 100})")},
      {false,
       with_requirement(
           R"({"id": "R", "zone": "part", "quantity": "pore_spacing", "min": 1, "relative": "yes"})")}};
}

// What a schema does not say of a spec: only the reader finds these.
struct Difference {
  const char* name;
  std::string text;
};

std::vector<Difference> differences() {
  return {
      {"which quantity takes which limit",
       with_requirement(R"({"id": "R", "zone": "part", "quantity": "porosity", "min": 1})")},
      {"which quantity takes which detail",
       with_requirement(R"({"id": "R", "zone": "part", "quantity": "porosity", "max": 1, "percentile": 5})")},
      {"min above max",
       with_requirement(R"({"id": "R", "zone": "part", "quantity": "wall_thickness", "min": 2, "max": 1})")},
      {"an id used twice", with_requirement(R"({"id": "R", "zone": "part", "quantity": "porosity", "max": 1},
                           {"id": "R", "zone": "part", "quantity": "pore_count", "max": 1})")},
      {"a zone that does not exist",
       with_requirement(R"({"id": "R", "zone": "rim", "quantity": "porosity", "max": 1})")},
      {"a part of a union that does not exist", with_zone(R"({"id": "a", "shape": "union", "of": ["b"]})")},
      {"a zone that is a part of itself", with_zone(R"({"id": "a", "shape": "union", "of": ["a"]})")},
      {"corners of a box that are swapped",
       with_zone(R"({"id": "a", "shape": "box", "min_mm": [0, 0, 2], "max_mm": [1, 1, 1]})")},
      {"a cylinder without length",
       with_zone(
           R"({"id": "a", "shape": "cylinder", "from_mm": [1, 1, 1], "to_mm": [1, 1, 1], "radius_mm": 1})")},
      {"depths that are swapped", with_zone(R"({"id": "a", "shape": "skin", "depth_mm": [2, 1]})")},
      {"a mesh file that does not exist", with_zone(R"({"id": "a", "shape": "mesh", "file": "none.stl"})")},
      {"material that is darker than air", with_key(R"("grey_levels": {"air": 200, "material": 100})")},
      {"a key that stands twice", with_key(R"("title": "a", "title": "b")")}};
}

}  // namespace

TEST_CASE("reader and schema agree on sound and on broken specs") {
  const std::vector<Case> cases = corpus();
  CHECK(cases.size() >= 60);
  for (const Case& c : cases) {
    const auto reader = reader_problems(c.text, ""), schema = by_schema(c.text);
    INFO(c.text << "\nreader:\n" << lines(reader) << "schema:\n" << lines(schema));
    CHECK(reader.empty() == c.sound);
    CHECK(schema.empty() == c.sound);
    // Together they say what the reader says alone: nothing stands twice.
    CHECK(lines(check_spec_text(c.text, "")) == lines(reader));
  }
}

TEST_CASE("what a schema cannot say is found by the reader alone") {
  for (const Difference& d : differences()) {
    const auto reader = reader_problems(d.text, ""), schema = by_schema(d.text);
    INFO(d.name << "\nreader:\n" << lines(reader) << "schema:\n" << lines(schema));
    CHECK_FALSE(reader.empty());
    CHECK(schema.empty());
  }
}

TEST_CASE("the schema names places as the reader does") {
  const auto place_of = [](const std::string& text) {
    const auto found = by_schema(text);
    INFO(lines(found));
    REQUIRE(found.size() == 1);
    return found[0].place;
  };
  CHECK(place_of("[]") == "file");
  CHECK(place_of(with_key(R"("titel": "x")")) == "titel");
  CHECK(place_of(with_key(R"("pores": {"min_voxels": 0})")) == "pores.min_voxels");
  CHECK(
      place_of(with_zone(R"({"id": "rim", "shape": "sphere", "centre_mm": [0, 0, "x"], "radius_mm": 1})")) ==
      "zones[0] (rim).centre_mm[2]");
  CHECK(place_of(with_requirement(R"({"id": "R7", "quantity": "porosity", "max": 1})")) ==
        "requirements[0] (R7).zone");
  CHECK(place_of(with_zone(R"({"id": "rim", "shape": "everything", "of": ["a"]})")) == "zones[0] (rim)");
}

TEST_CASE("only what the reader has not named is added") {
  const auto merged = [](std::vector<SpecProblem> reader, const std::vector<SpecProblem>& schema) {
    add_unnamed(reader, schema);
    std::string places;
    for (const SpecProblem& p : reader) places += p.place + ";";
    return places;
  };
  CHECK(merged({{"zones[1] (a).max_mm", ""}}, {{"zones[1] (a).max_mm[0]", ""}}) == "zones[1] (a).max_mm;");
  CHECK(merged({{"zones[1] (a).max_mm", ""}}, {{"zones[1] (a)", ""}}) == "zones[1] (a).max_mm;");
  CHECK(merged({{"requirements[1] (a).max", ""}}, {{"requirements[1] (a).max_mm", ""}}) ==
        "requirements[1] (a).max;requirements[1] (a).max_mm;");
  CHECK(merged({{"zones[1]", ""}}, {{"zones[10]", ""}, {"title", ""}}) == "zones[1];zones[10];title;");
  CHECK(merged({{"file", ""}}, {{"title", ""}}) == "file;");
}

TEST_CASE("the specs of the demo parts and of the README fit the schema") {
  std::vector<std::string> specs;
  for (const std::string& name : demo_names()) specs.push_back(demo_part(name).spec_json);
  CHECK(specs.size() >= 3);
  std::ifstream file(HALFMARK_SOURCE_DIR "/README.md");
  const std::string readme{std::istreambuf_iterator<char>(file), {}};
  std::size_t examples = 0;
  for (std::size_t at = 0; (at = readme.find("```json\n", at)) != std::string::npos; ++examples) {
    at += 8;
    const std::string text = readme.substr(at, readme.find("```", at) - at);
    if (text.find("spec_version") != std::string::npos) specs.push_back(text);
  }
  CHECK(examples >= 1);
  for (const std::string& text : specs) {
    const auto schema = by_schema(text), reader = reader_problems(text, "");
    INFO(text << lines(schema) << lines(reader));
    CHECK(schema.empty());
    CHECK(reader.empty());
    CHECK(by_schema(spec_to_json(parse_spec(text, ""))).empty());
  }
}

TEST_CASE("every key of the schema is described, and the program carries the file's own bytes") {
  std::ifstream file(HALFMARK_SOURCE_DIR "/io/spec.schema.json");
  const std::string bytes{std::istreambuf_iterator<char>(file), {}};
  CHECK(bytes == spec_schema_text());
  const nlohmann::json schema = nlohmann::json::parse(bytes);
  std::vector<const nlohmann::json*> open{&schema, &schema["definitions"]["zone"],
                                          &schema["definitions"]["requirement"]};
  std::size_t keys = 0;
  while (!open.empty()) {
    const nlohmann::json& object = *open.back();
    open.pop_back();
    CHECK(object.value("additionalProperties", true) == false);
    for (const auto& [key, value] : object["properties"].items()) {
      INFO(key);
      ++keys;
      CHECK_FALSE(value.value("description", "").empty());
      if (value.contains("properties")) open.push_back(&value);
    }
  }
  CHECK(keys > 50);
}

TEST_CASE("a hostile spec is answered quickly, with a short list") {
  std::string zones, unknown, parts;
  for (int i = 0; i < 999; ++i) {
    parts.clear();
    for (int k = 0; k < 90; ++k)
      parts += (k == 0 ? "\"z" : ",\"z") + std::to_string((i + k * 11) % 999) + "\"";
    zones += std::string(i == 0 ? "" : ",") + R"({"id":"z)" + std::to_string(i) +
             R"(","shape":"union","of":[)" + parts + "]}";
  }
  for (int i = 0; i < 200000; ++i) unknown += "\"key" + std::to_string(i) + "\": 1, ";
  for (const std::string& text :
       {with_zone(zones), "{" + unknown + R"("spec_version": 1})",
        with_zone("1" + std::string(1900000, ' ') + ",1"), "{\"spec_version\": 1, \"requirements\": [1" + [] {
          std::string out;
          for (int i = 0; i < 1000000; ++i) out += ",1";
          return out;
        }() + "]}"}) {
    const auto problems = check_spec_text(text, "");
    CHECK_FALSE(problems.empty());
    CHECK(problems.size() < 5000);
  }
}
