// result.json: valid by its schema, the same after reading back, and clear about files that are no results.

#include <cmath>
#include <filesystem>
#include <fstream>
#include <limits>
#include <nlohmann/json.hpp>
#include <valijson/adapters/nlohmann_json_adapter.hpp>
#include <valijson/schema.hpp>
#include <valijson/schema_parser.hpp>
#include <valijson/validation_results.hpp>
#include <valijson/validator.hpp>

#include "io/problem.h"
#include "reports/report_json.h"
#include "tests/support/catch.h"
#include "tests/support/sample_run.h"
#include "tests/support/temporary_folder.h"

using namespace halfmark;
namespace fs = std::filesystem;

namespace {

struct Folder : TemporaryFolder {
  fs::path with(const std::string& name, const std::string& bytes) const {
    std::ofstream(*this / name, std::ios::binary) << bytes;
    return *this / name;
  }
};

Inspection full_inspection() {
  static const MemoryVolume volume = sample::volume();
  Inspection in = sample::run(volume).inspection;
  in.grey_levels.histogram.first_grey = 10;
  in.grey_levels.histogram.bin_width = 2;
  in.grey_levels.histogram.counts.assign(3000, 1);
  in.grey_levels.other_peaks = {12345.678};
  WallSummary walls;
  walls.any_wall = true;
  walls.least_mm = {1.6180339887498949, 0.02, {{"noise", 0.02}}};
  walls.mean_mm = 2.1;
  walls.percentiles = {{1, 1.7}, {50, 2.2}};
  walls.spots = {{{1, 2, 3}, 1.65, 1.6, 0.7}};
  in.walls = walls;
  Requirement& r = in.requirements[1].requirement;
  r.min = 0.1;
  r.axis = 1;
  r.window_mm = 2.5;
  r.reference = ReferenceBody{true, 3};
  r.percentile = 5;
  r.relative = true;
  r.ignore_below_mm = 0.3;
  in.requirements[2].has_value = false;
  in.requirements[2].evidence.position_mm.reset();
  in.pores[1].disposition = "seen before";
  in.spec.file = "/specs/plate.spec.json";
  in.spec.zones.push_back(in.spec.zones[0]);
  in.spec.zones.back().id = "rib";
  in.spec.zones.back().shape = ZoneShape::mesh;
  in.spec.zones.back().file = "/specs/meshes/rib.stl";
  return in;
}

std::vector<std::string> schema_errors(const nlohmann::json& document) {
  std::ifstream file(HALFMARK_SOURCE_DIR "/reports/result.schema.json");
  const nlohmann::json text = nlohmann::json::parse(file);
  valijson::Schema schema;
  valijson::SchemaParser parser;
  const valijson::adapters::NlohmannJsonAdapter schema_adapter(text), document_adapter(document);
  parser.populateSchema(schema_adapter, schema);
  valijson::Validator validator;
  valijson::ValidationResults results;
  validator.validate(schema, document_adapter, &results);
  std::vector<std::string> errors;
  valijson::ValidationResults::Error error;
  while (results.popError(error)) {
    std::string place;
    for (const std::string& step : error.context) place += step;
    errors.push_back(place + ": " + error.description);
  }
  return errors;
}

std::string problem_of(const fs::path& path, ExitStatus status) {
  try {
    read_result(path);
  } catch (const Problem& problem) {
    CHECK(problem.status() == status);
    return problem.what();
  }
  return "no problem";
}

}  // namespace

TEST_CASE("result.json is valid by its schema, and the schema refuses what it should") {
  const Inspection in = full_inspection();
  nlohmann::json document = nlohmann::json::parse(result_to_json(in));
  for (const std::string& error : schema_errors(document)) {
    INFO(error);
    CHECK(false);
  }
  CHECK(schema_errors(nlohmann::json::parse(result_to_json(in, true))).empty());
  Inspection plain = in;
  plain.walls.reset();
  CHECK(schema_errors(nlohmann::json::parse(result_to_json(plain))).empty());
  document["requirements"][0]["verdict"] = "maybe";
  CHECK(!schema_errors(document).empty());
  document = nlohmann::json::parse(result_to_json(in));
  document["grey_levels"]["air"] = "dark";
  CHECK(!schema_errors(document).empty());
}

TEST_CASE("Reading back gives every number bit for bit and writing it again the same bytes") {
  const Folder folder;
  const Inspection in = full_inspection();
  const std::string text = result_to_json(in);
  const Inspection back = read_result(folder.with("result.json", text));
  CHECK(result_to_json(in) == text);
  REQUIRE(back.pores.size() == 3);
  CHECK(back.pores[0].volume_mm3.value == in.pores[0].volume_mm3.value);
  CHECK(back.pores[2].min_index == in.pores[2].min_index);
  CHECK(std::isnan(back.pores[2].sphericity));
  CHECK(back.pores[1].disposition == "seen before");
  CHECK(back.pores[1].zones == in.pores[1].zones);
  CHECK(back.walls->least_mm.value == 1.6180339887498949);
  CHECK(back.requirements[1].requirement.axis == 1);
  CHECK(back.requirements[1].requirement.reference->sphere);
  CHECK(!back.requirements[2].has_value);
  CHECK(!back.requirements[2].evidence.position_mm);
  CHECK(back.volume.geometry.size == in.volume.geometry.size);
  CHECK(back.verdict == Verdict::reject);
  REQUIRE(back.spec.zones.size() == 2);
  CHECK(back.spec.zones[1].shape == ZoneShape::mesh);
  CHECK(back.spec.zones[1].file == folder / "meshes/rib.stl");
  REQUIRE(back.spec.requirements.size() == 3);
  CHECK(back.spec.requirements[0].max == in.spec.requirements[0].max);
  CHECK(back.grey_levels.histogram.counts.size() <= 1024);
  std::int64_t voxels = 0;
  for (const std::int64_t n : back.grey_levels.histogram.counts) voxels += n;
  CHECK(voxels == 3000);
  const std::string again = result_to_json(back);
  std::size_t differs = 0;
  while (differs < text.size() && differs < again.size() && text[differs] == again[differs]) ++differs;
  INFO(text.substr(differs, 80) + " | " + again.substr(std::min(differs, again.size()), 80));
  CHECK(again == text);
}

TEST_CASE("Results hold no folders of the machine, no date unless asked, and never NaN") {
  Inspection in = full_inspection();
  in.volume.file = "/home/someone/parts/plate.mha";
  in.spec.file = "/home/someone/specs/plate.spec.json";
  in.part_volume_mm3.value = std::nan("");
  in.surface_area_mm2 = std::numeric_limits<double>::infinity();
  const std::string text = result_to_json(in);
  CHECK(text.find("someone") == std::string::npos);
  CHECK(text.find("/specs") == std::string::npos);
  CHECK(text.find("\"file\": \"rib.stl\"") != std::string::npos);
  CHECK(text.find("\"file\": \"plate.mha\"") != std::string::npos);
  CHECK(text.find("written_at") == std::string::npos);
  CHECK(text.find("nan") == std::string::npos);
  CHECK(text.find("inf") == std::string::npos);
  CHECK(text.find("\"volume_mm3\": null") != std::string::npos);
  CHECK(result_to_json(in, true).find("written_at") != std::string::npos);
}

TEST_CASE("Bytes that are not UTF-8 do not stop the result") {
  Inspection in = full_inspection();
  in.serial = "A\xff\xc3(\"\n";
  const std::string text = result_to_json(in);
  CHECK(nlohmann::json::parse(text)["serial"].get<std::string>().find('A') == 0);
}

TEST_CASE("Every truncation of a result and other kinds of files get one clear sentence") {
  const Folder folder;
  const std::string text = result_to_json(full_inspection());
  // Cutting only the last line end leaves whole JSON.
  for (std::size_t length = 0; length + 2 < text.size(); length += 97) {
    const std::string sentence =
        problem_of(folder.with("cut.json", text.substr(0, length)), ExitStatus::bad_data);
    CHECK(sentence.find("cut.json") != std::string::npos);
  }
  CHECK(problem_of(folder.with("a.json", "{}"), ExitStatus::bad_data).find("result_version") !=
        std::string::npos);
  CHECK(problem_of(folder.with("b.json", "[1]"), ExitStatus::bad_data).find("b.json") != std::string::npos);
  CHECK(problem_of(folder.with("c.json", std::string(100000, '[')), ExitStatus::bad_data).find("c.json") !=
        std::string::npos);
  CHECK(problem_of(folder / "none.json", ExitStatus::input_missing).find("no such file") !=
        std::string::npos);
  CHECK(problem_of(folder.path(), ExitStatus::bad_data).find("is a folder") != std::string::npos);
  CHECK(problem_of("/dev/zero", ExitStatus::bad_data).find("plain file") != std::string::npos);
}

TEST_CASE("A wrong member is named with its place") {
  const Folder folder;
  const auto broken = [&](auto&& change) {
    nlohmann::ordered_json json = nlohmann::ordered_json::parse(result_to_json(full_inspection()));
    change(json);
    return problem_of(folder.with("broken.json", json.dump()), ExitStatus::bad_data);
  };
  CHECK(broken([](auto& j) { j["grey_levels"].erase("air"); }).find("grey_levels.air") != std::string::npos);
  CHECK(broken([](auto& j) { j["requirements"][1]["verdict"] = "fine"; }).find("requirements[1].verdict") !=
        std::string::npos);
  CHECK(broken([](auto& j) { j["pores"]["table"]["kind"].erase(0); }).find("pores.table.kind") !=
        std::string::npos);
  CHECK(broken([](auto& j) { j["volume"]["size"][0] = 1e300; }).find("volume.size[0]") != std::string::npos);
  CHECK(broken([](auto& j) { j["volume"]["size"][0] = 9000000000; }).find("volume.size[0]") !=
        std::string::npos);
  CHECK(broken([](auto& j) { j["volume"]["voxel_mm"][2] = 0; }).find("volume.voxel_mm") != std::string::npos);
  CHECK(broken([](auto& j) { j["result_version"] = 2; }).find("newer") != std::string::npos);
}
