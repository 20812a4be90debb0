#include <random>
#include <string>

#include "io/inspection_spec.h"
#include "io/problem.h"
#include "tests/support/catch.h"

using namespace halfmark;

namespace {

const std::string sound = R"({
  "spec_version": 1, "title": "Bracket", "part": {"name": "bracket", "drawing": "B-1042", "revision": "C", "material": "Al"},
  "grey_levels": {"air": "auto", "material": 41000}, "surface": {"method": "iso50"},
  "pores": {"method": "local", "min_voxels": 8, "open_closing_radius_mm": 0.5, "open_min_depth_mm": 0.2, "inclusions": true},
  "wall_thickness": {"method": "inscribed_sphere", "max_mm": 8.0, "patch_mm2": 0.25},
  "zones": [
    {"id": "flange", "shape": "box", "min_mm": [0, 0, 0], "max_mm": [40, 20, 6]},
    {"id": "skin", "shape": "skin", "depth_mm": [0.5, 1.0]},
    {"id": "insert", "shape": "cylinder", "from_mm": [10, 10, 0], "to_mm": [10, 10, 6], "radius_mm": 3, "use": "exclude"},
    {"id": "ball", "shape": "sphere", "centre_mm": [1, 2, 3], "radius_mm": 2},
    {"id": "both", "shape": "union", "of": ["flange", "ball"]}],
  "requirements": [
    {"id": "R1", "zone": "part", "quantity": "porosity", "max": 0.5},
    {"id": "R2", "zone": "flange", "quantity": "pore_diameter", "max": 0.8, "ignore_below_mm": 0.3},
    {"id": "R3", "zone": "both", "quantity": "local_porosity", "max": 3, "reference": {"shape": "cube", "size_mm": 3}},
    {"id": "R4", "zone": "part", "quantity": "wall_thickness", "min": 1.8, "percentile": 5},
    {"id": "R5", "zone": "part", "quantity": "section_porosity", "max": 3, "axis": "z", "window_mm": 4},
    {"id": "R6", "zone": "part", "quantity": "pore_spacing", "min": 2, "relative": true}],
  "decision": {"rule": "guarded", "conformance_probability": 0.95}})";

// All problems of a spec whose text `from` is replaced by `to`, as "place: sentence" lines.
std::string problems_with(const std::string& from, const std::string& to) {
  std::string text = sound;
  const std::size_t at = text.find(from);
  REQUIRE(at != std::string::npos);
  text.replace(at, from.size(), to);
  std::string out;
  for (const SpecProblem& p : check_spec_text(text, "")) out += p.place + ": " + p.sentence + "\n";
  return out;
}

bool has(const std::string& text, const std::string& words) { return text.find(words) != std::string::npos; }

}  // namespace

TEST_CASE("a sound spec is read and written without loss") {
  const InspectionSpec spec = parse_spec(sound, "");
  CHECK(spec.part.drawing == "B-1042");
  CHECK(*spec.grey_levels.material == 41000);
  CHECK_FALSE(spec.grey_levels.air.has_value());
  CHECK(spec.zones.size() == 6);  // "part" is added
  CHECK(spec.zones[1].from_depth_mm == 0.5);
  CHECK(spec.zones[2].use == ZoneUse::exclude);
  CHECK(*spec.requirements[1].ignore_below_mm == 0.3);
  CHECK(*spec.requirements[4].axis == 2);
  CHECK(spec.requirements[5].relative);
  CHECK(*spec.decision.conformance_probability == 0.95);
  const std::string written = spec_to_json(spec);
  CHECK(spec_to_json(parse_spec(written, "")) == written);
}

TEST_CASE("each mistake is named by its place, with what was meant") {
  struct Case {
    const char *from, *to, *place, *words;
  };
  for (const Case& c :
       {Case{"\"pore_diameter\"", "\"pore_diametre\"", "requirements[1] (R2).quantity",
             "did you mean 'pore_diameter'"},
        Case{"\"max\": 0.8", "\"maximum\": 0.8", "requirements[1] (R2).maximum", "did you mean 'max'"},
        Case{"\"zone\": \"flange\"", "\"zone\": \"flagne\"", "requirements[1] (R2).zone",
             "did you mean 'flange'"},
        Case{"\"max\": 0.5", "\"max\": \"0.5\"", "requirements[0] (R1).max", "must be a number, not a text"},
        Case{"\"max\": 0.5", "\"max\": 0.5, \"min\": 0.1", "requirements[0] (R1).min", "takes a 'max' only"},
        Case{"\"min\": 1.8", "\"min\": 1.8, \"max\": 1.2", "requirements[3] (R4).min", "lies above max"},
        Case{"\"max\": 0.5", "\"ignore_below_mm\": 0.5", "requirements[0] (R1)", "needs a limit"},
        Case{"\"id\": \"R2\"", "\"id\": \"R1\"", "requirements[1] (R1).id", "names another requirement"},
        Case{"\"min_voxels\": 8", "\"min_voxels\": 0", "pores.min_voxels", "at least 1"},
        Case{"\"min_voxels\": 8", "\"min_voxles\": 8", "pores.min_voxles", "did you mean 'min_voxels'"},
        Case{"\"method\": \"local\"", "\"method\": \"otsu\"", "pores.method", "possible: local, iso50"},
        Case{"\"method\": \"iso50\"", "\"method\": \"local\"", "surface.method",
             "not supported by this version"},
        Case{"\"material\": 41000", "\"material\": 41000, \"air\": 50000", "grey_levels.material",
             "above the air level"},
        Case{"[40, 20, 6]", "[40, 20, 0]", "zones[0] (flange).max_mm", "above min_mm"},
        Case{"[0.5, 1.0]", "[1.0, 0.5]", "zones[1] (skin).depth_mm", "from < to"},
        Case{"[\"flange\", \"ball\"]", "[\"flange\", \"both\"]", "zones[4] (both).of", "leads back"},
        Case{"\"radius_mm\": 2", "\"radius_mm\": -2", "zones[3] (ball).radius_mm", "above 0"},
        Case{"\"zone\": \"flange\"", "\"zone\": \"insert\"", "requirements[1] (R2).zone", "left out"},
        Case{"\"title\"", "\"titel\"", "titel", "did you mean 'title'"},
        Case{"\"title\"", "\"alignment\"", "alignment", "not supported by this version"},
        Case{"\"spec_version\": 1", "\"spec_version\": 2", "spec_version", "only version 1"},
        Case{"\"percentile\": 5", "\"percentile\": 100", "requirements[3] (R4).percentile",
             "between 0 and 100"},
        Case{", \"reference\": {\"shape\": \"cube\", \"size_mm\": 3}", "", "requirements[2] (R3).reference",
             "is missing"},
        Case{"0.95", "1.5", "decision.conformance_probability", "between 0.5 and 1"},
        Case{"\"title\": \"Bracket\",", "\"title\": \"Bracket\" \"x\",", "line 2", "not valid JSON"}}) {
    const std::string problems = problems_with(c.from, c.to);
    INFO("'" << c.from << "' -> '" << c.to << "':\n" << problems);
    CHECK(has(problems, c.place));
    CHECK(has(problems, c.words));
  }
}

TEST_CASE("specs without a requirement and hostile texts are refused") {
  for (const std::string& text :
       {std::string("{\"spec_version\": 1, \"requirements\": []}"), std::string("{\"spec_version\": 1}"),
        std::string("[]"), std::string(""), std::string("null"), std::string(100000, '['),
        std::string("{\"spec_version\": NaN}"), std::string("\xff\xfe{}"),
        std::string("{\"spec_version\": 1e999, \"requirements\": [{}]}"), std::string(5 << 20, ' ')}) {
    CHECK_FALSE(check_spec_text(text, "").empty());
    CHECK_THROWS_AS(parse_spec(text, ""), Problem);
  }
}

TEST_CASE("no damage to the text does worse than a list of problems") {
  const unsigned seed = 20;
  INFO("seed " << seed);
  std::mt19937 random(seed);
  for (int i = 0; i < 1500; ++i) {
    std::string text = sound;
    for (int k = 0; k < 3; ++k) text[random() % text.size()] = static_cast<char>(random() % 256);
    if (i % 3 == 0) text.resize(random() % text.size());
    CHECK_NOTHROW(check_spec_text(text, ""));
  }
}
