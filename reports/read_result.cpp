// The way back of report_json.cpp, member by member in the same order.
#include <algorithm>
#include <cmath>
#include <fstream>
#include <sstream>
#include <system_error>

#include "io/problem.h"
#include "reports/json_value.h"
#include "reports/pore_columns.h"
#include "reports/report_json.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

constexpr std::int64_t known_version = 1;
constexpr Verdict verdicts[] = {Verdict::accept, Verdict::reject, Verdict::undecided};
constexpr Quantity quantities[] = {
    Quantity::porosity,        Quantity::section_porosity, Quantity::local_porosity,
    Quantity::pore_count,      Quantity::pore_density,     Quantity::pore_diameter,
    Quantity::pore_length,     Quantity::pore_spacing,     Quantity::pore_nest,
    Quantity::pore_depth,      Quantity::open_porosity,    Quantity::inclusion_diameter,
    Quantity::inclusion_count, Quantity::wall_thickness,   Quantity::material_volume,
    Quantity::surface_area};
// No volume has more voxels along an axis, no scan more bodies; keeps products of sizes from overflowing.
constexpr std::int64_t largest_size = 1 << 20;

std::map<std::string, std::string> text_map(const JsonPlace& place) {
  if (!place.json().is_object()) place.fail("should be an object");
  std::map<std::string, std::string> texts;
  for (const auto& member : place.json().items()) texts[member.key()] = place.at(member.key()).text();
  return texts;
}

int small_integer(const JsonPlace& place) {
  const std::int64_t value = place.integer();
  if (std::abs(value) > largest_size) place.fail("is too large");
  return static_cast<int>(value);
}

VolumeText read_volume(const JsonPlace& place) {
  VolumeText v;
  v.file = place.at("file").text();
  v.format = place.at("format").text();
  v.sha256 = place.at("sha256").text();
  v.voxel_type = place.at("voxel_type").text();
  const std::vector<JsonPlace> size = place.at("size").items();
  if (size.size() != 3) place.at("size").fail("should be three numbers");
  for (std::size_t a = 0; a < 3; ++a) {
    v.geometry.size[a] = size[a].integer();
    if (v.geometry.size[a] < 0 || v.geometry.size[a] > largest_size) size[a].fail("is no size of a volume");
  }
  v.geometry.spacing_mm = place.at("voxel_mm").vec3();
  for (const double s : v.geometry.spacing_mm)
    if (!(s > 0) || !std::isfinite(s)) place.at("voxel_mm").fail("should be three lengths above 0");
  v.geometry.origin_mm = place.at("origin_mm").vec3();
  const std::vector<double> direction = place.at("direction").numbers();
  if (direction.size() != 9) place.at("direction").fail("should be nine numbers");
  std::copy(direction.begin(), direction.end(), v.geometry.direction.begin());
  v.field_share = place.at("field_share").number();
  v.scan = text_map(place.at("scan"));
  return v;
}

// A result is read where it lies, without the mesh files of its spec, which parse_spec asks for: mesh zones
// become plain ones while the spec is parsed. Returns their files by zone.
std::map<std::string, std::string> without_meshes(Json& spec) {
  std::map<std::string, std::string> files;
  if (!spec.is_object() || !spec.contains("zones") || !spec["zones"].is_array()) return files;
  for (Json& zone : spec["zones"]) {
    if (!zone.is_object() || zone.value("shape", Json()) != "mesh") continue;
    const Json id = zone.value("id", Json()), file = zone.value("file", Json());
    if (!id.is_string() || !file.is_string()) continue;
    files[id.get<std::string>()] = file.get<std::string>();
    zone["shape"] = "everything";
    zone.erase("file");
  }
  return files;
}

InspectionSpec read_spec_part(const JsonPlace& place, const fs::path& folder) {
  const JsonPlace content = place.at("content");
  Json text = content.json();
  const std::map<std::string, std::string> meshes = without_meshes(text);
  InspectionSpec spec;
  try {
    spec = parse_spec(text.dump(), folder);
  } catch (const Problem& problem) {
    content.fail(problem.what());
  }
  for (ZoneSpec& zone : spec.zones) {
    const auto mesh = meshes.find(zone.id);
    if (mesh == meshes.end()) continue;
    zone.shape = ZoneShape::mesh;
    zone.file = folder / mesh->second;
  }
  const std::string name = place.at("file").text();
  if (!name.empty()) spec.file = folder / fs::path(name).filename();
  spec.sha256 = place.at("sha256").text();
  return spec;
}

Histogram read_histogram(const JsonPlace& place) {
  Histogram h;
  h.first_grey = place.at("first_grey").number();
  h.bin_width = place.at("bin_width").number();
  for (const JsonPlace& count : place.at("counts").items()) h.counts.push_back(count.integer());
  return h;
}

GreyLevels read_levels(const JsonPlace& place) {
  GreyLevels g;
  g.air = place.at("air").number();
  g.material = place.at("material").number();
  g.threshold = place.at("threshold").number();
  g.threshold_standard_uncertainty = place.at("threshold_standard_uncertainty").number();
  g.air_noise = place.at("air_noise").number();
  g.material_noise = place.at("material_noise").number();
  g.contrast_to_noise = place.at("contrast_to_noise").number();
  g.noise_correlation = place.at("noise_correlation").vec3();
  g.noise_is_white = place.at("noise_is_white").flag();
  g.blur_voxel = place.at("blur_voxel").number();
  g.blur_standard_uncertainty_voxel = place.at("blur_standard_uncertainty_voxel").number();
  g.blur_mm = place.at("blur_mm").number();
  g.blur_measured = place.at("blur_measured").flag();
  g.source = place.at("source").text();
  g.air_seen = place.at("air_seen").flag();
  g.material_seen = place.at("material_seen").flag();
  g.other_peaks = place.at("other_peaks").numbers();
  g.warnings = place.at("warnings").texts();
  g.histogram = read_histogram(place.at("histogram"));
  return g;
}

void read_part(const JsonPlace& place, Inspection& inspection) {
  inspection.part_volume_mm3 = place.measured("volume", "_mm3");
  inspection.surface_area_mm2 = place.at("surface_area_mm2").number();
  inspection.part_min_mm = place.at("bounds_mm").at("min").vec3();
  inspection.part_max_mm = place.at("bounds_mm").at("max").vec3();
  inspection.has_outside = place.at("has_outside").flag();
  inspection.part_cut_by_field = place.at("cut_by_field").flag();
  inspection.body = small_integer(place.at("body"));
  for (const JsonPlace& item : place.at("bodies").items()) {
    Body body;
    body.voxels = item.at("voxels").integer();
    body.volume_mm3 = item.at("volume_mm3").number();
    body.min_mm = item.at("min_mm").vec3();
    body.max_mm = item.at("max_mm").vec3();
    body.cut_by_field = item.at("cut_by_field").flag();
    inspection.bodies.push_back(body);
  }
}

std::optional<double> optional_number(const JsonPlace& place, const char* key) {
  if (!place.has(key)) return std::nullopt;
  return place.at(key).number();
}

Requirement read_requirement(const JsonPlace& place) {
  Requirement q;
  q.id = place.at("id").text();
  q.zone = place.at("zone").text();
  q.quantity = place.at("quantity").one_of(quantities);
  q.min = optional_number(place, "min");
  q.max = optional_number(place, "max");
  q.ignore_below_mm = optional_number(place, "ignore_below_mm");
  q.window_mm = optional_number(place, "window_mm");
  q.percentile = optional_number(place, "percentile");
  q.relative = place.has("relative") && place.at("relative").flag();
  if (place.has("axis")) {
    const std::string axis = place.at("axis").text();
    if (axis != "x" && axis != "y" && axis != "z") place.at("axis").fail("should be x, y or z");
    q.axis = axis[0] - 'x';
  }
  if (place.has("reference")) {
    const JsonPlace reference = place.at("reference");
    q.reference = ReferenceBody{reference.at("shape").text() == "sphere", reference.at("size_mm").number()};
  }
  return q;
}

Evidence read_evidence(const JsonPlace& place) {
  Evidence e;
  if (place.has("pore_id")) e.pore_id = static_cast<std::int32_t>(place.at("pore_id").integer());
  if (place.has("position_mm")) e.position_mm = place.at("position_mm").vec3();
  e.extent_mm = place.at("extent_mm").number();
  e.what = place.at("what").text();
  return e;
}

RequirementResult read_requirement_result(const JsonPlace& place) {
  RequirementResult r;
  r.requirement = read_requirement(place);
  r.unit = place.at("unit").text();
  r.has_value = place.has("measured");
  if (r.has_value) r.measured.value = place.at("measured").number();
  r.measured.standard_uncertainty = place.at("standard_uncertainty").number();
  r.expanded_uncertainty = place.at("expanded_uncertainty").number();
  r.coverage_factor = place.at("coverage_factor").number();
  for (const JsonPlace& part : place.at("contributions").items())
    r.measured.contributions.push_back({part.at("name").text(), part.at("standard_uncertainty").number()});
  r.verdict = place.at("verdict").one_of(verdicts);
  r.reason = place.at("reason").text();
  r.evidence = read_evidence(place.at("evidence"));
  r.warnings = place.at("warnings").texts();
  return r;
}

PoreSummary read_pore_summary(const JsonPlace& place) {
  PoreSummary s;
  s.count = place.at("count").integer();
  s.closed = place.at("closed").integer();
  s.open = place.at("open").integer();
  s.cut_by_field = place.at("cut_by_field").integer();
  s.in_between = place.at("in_between").integer();
  s.diffuse = place.at("diffuse").integer();
  s.inclusions = place.at("inclusions").integer();
  s.volume_mm3 = place.measured("volume", "_mm3");
  s.porosity_percent = place.measured("porosity", "_percent");
  s.open_porosity_percent = place.at("open_porosity_percent").number();
  s.smallest_expected_diameter_mm = place.at("smallest_expected_diameter_mm").number();
  return s;
}

WallSummary read_walls(const JsonPlace& place) {
  WallSummary walls;
  walls.any_wall = place.at("any_wall").flag();
  walls.least_mm = place.measured("least", "_mm");
  walls.mean_mm = place.at("mean_mm").number();
  for (const JsonPlace& item : place.at("percentiles").items())
    walls.percentiles.emplace_back(item.at("percent").number(), item.at("thickness_mm").number());
  for (const JsonPlace& item : place.at("spots").items())
    walls.spots.push_back({item.at("position_mm").vec3(), item.at("patch_mean_mm").number(),
                           item.at("least_mm").number(), item.at("area_mm2").number()});
  return walls;
}

Inspection read_all(const JsonPlace& place, const fs::path& folder) {
  if (place.at("result_version").integer() != known_version)
    place.at("result_version").fail("is not 1: this file was written by a newer program");
  Inspection inspection;
  inspection.verdict = place.at("verdict").one_of(verdicts);
  inspection.serial = place.at("serial").text();
  inspection.volume = read_volume(place.at("volume"));
  inspection.spec = read_spec_part(place.at("spec"), folder);
  inspection.grey_levels = read_levels(place.at("grey_levels"));
  inspection.material_level_spread_percent =
      place.at("grey_levels").at("material_level_spread_percent").number();
  read_part(place.at("part"), inspection);
  for (const JsonPlace& item : place.at("requirements").items())
    inspection.requirements.push_back(read_requirement_result(item));
  inspection.pore_summary = read_pore_summary(place.at("pores"));
  inspection.pores = pores_from_columns(place.at("pores").at("table"));
  if (place.has("wall_thickness")) inspection.walls = read_walls(place.at("wall_thickness"));
  inspection.settings = text_map(place.at("settings"));
  inspection.not_searched = place.at("not_searched").texts();
  inspection.warnings = place.at("warnings").texts();
  return inspection;
}

std::string file_bytes(const fs::path& path) {
  std::error_code error;
  const fs::file_status status = fs::status(path, error);
  if (status.type() == fs::file_type::not_found)
    throw Problem(ExitStatus::input_missing,
                  path.string() + ": there is no such file; give the result.json of an inspection");
  if (status.type() == fs::file_type::directory)
    throw Problem(ExitStatus::bad_data, path.string() + ": is a folder; give the result.json in it");
  if (status.type() != fs::file_type::regular)
    throw Problem(ExitStatus::bad_data,
                  path.string() + ": is not a plain file; give the result.json of an inspection");
  std::ifstream file(path, std::ios::binary);
  std::ostringstream bytes;
  bytes << file.rdbuf();
  if (!file)
    throw Problem(ExitStatus::input_missing, path.string() + ": cannot be read; check its permissions");
  return bytes.str();
}

}  // namespace

Inspection read_result(const fs::path& result_json) {
  const std::string bytes = file_bytes(result_json);
  const std::string name = result_json.string();
  Json json;
  try {
    json = Json::parse(bytes);
  } catch (const Json::exception&) {
    throw Problem(ExitStatus::bad_data,
                  name + ": is not whole JSON (" + std::to_string(bytes.size()) +
                      " bytes): truncated or another kind of file; inspect the part again");
  }
  try {
    return read_all(JsonPlace(json, name), result_json.parent_path());
  } catch (const Json::exception& error) {
    throw Problem(ExitStatus::bad_data, name + ": is not a result file (" + error.what() + ")");
  }
}

}  // namespace halfmark
