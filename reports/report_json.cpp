#include "reports/report_json.h"

#include <algorithm>
#include <chrono>
#include <ctime>

#include "analysis/number_text.h"
#include "reports/json_value.h"
#include "reports/pore_columns.h"
#include "reports/program_text.h"

namespace halfmark {

namespace {

constexpr int result_version = 1;
// The histogram in the result serves for looking at; more bins than a screen has columns add nothing.
constexpr std::size_t most_histogram_bins = 1024;

Json text_map(const std::map<std::string, std::string>& texts) {
  Json object = Json::object();
  for (const auto& [key, value] : texts) object[key] = value;
  return object;
}

Json volume_json(const VolumeText& v) {
  const VolumeGeometry& g = v.geometry;
  Json json;
  json["file"] = file_name_of(v.file);
  json["format"] = v.format;
  json["sha256"] = v.sha256;
  json["size"] = Json::array({g.size[0], g.size[1], g.size[2]});
  json["voxel_mm"] = to_json(g.spacing_mm);
  json["origin_mm"] = to_json(g.origin_mm);
  json["direction"] = g.direction;
  json["voxel_type"] = v.voxel_type;
  json["field_share"] = v.field_share;
  json["scan"] = text_map(v.scan);
  return json;
}

// A mesh zone's file as seen from the spec's folder; its name alone when it lies elsewhere.
std::filesystem::path plain_path(const InspectionSpec& spec, const std::filesystem::path& file) {
  const std::filesystem::path below = file.lexically_relative(spec.file.parent_path());
  const bool outside = below.empty() || *below.begin() == "..";
  return outside ? (file.is_absolute() ? file.filename() : file) : below;
}

Json spec_json(const InspectionSpec& spec) {
  InspectionSpec plain = spec;
  plain.file.clear();
  for (ZoneSpec& zone : plain.zones)
    if (zone.shape == ZoneShape::mesh) zone.file = plain_path(spec, zone.file);
  Json json;
  json["file"] = file_name_of(spec.file.string());
  json["sha256"] = spec.sha256;
  json["title"] = spec.title;
  json["content"] = Json::parse(spec_to_json(plain));
  return json;
}

Json histogram_json(const Histogram& full) {
  const std::size_t step =
      std::max<std::size_t>(1, (full.counts.size() + most_histogram_bins - 1) / most_histogram_bins);
  std::vector<std::int64_t> counts((full.counts.size() + step - 1) / step, 0);
  for (std::size_t i = 0; i < full.counts.size(); ++i) counts[i / step] += full.counts[i];
  Json json;
  json["first_grey"] = full.first_grey + 0.5 * static_cast<double>(step - 1) * full.bin_width;
  json["bin_width"] = full.bin_width * static_cast<double>(step);
  json["counts"] = counts;
  return json;
}

Json levels_json(const Inspection& inspection) {
  const GreyLevels& g = inspection.grey_levels;
  Json json;
  json["air"] = g.air;
  json["material"] = g.material;
  json["threshold"] = g.threshold;
  json["threshold_standard_uncertainty"] = g.threshold_standard_uncertainty;
  json["air_noise"] = g.air_noise;
  json["material_noise"] = g.material_noise;
  json["contrast_to_noise"] = g.contrast_to_noise;
  json["noise_correlation"] = g.noise_correlation;
  json["noise_is_white"] = g.noise_is_white;
  json["blur_voxel"] = g.blur_voxel;
  json["blur_standard_uncertainty_voxel"] = g.blur_standard_uncertainty_voxel;
  json["blur_mm"] = g.blur_mm;
  json["blur_measured"] = g.blur_measured;
  json["material_level_spread_percent"] = inspection.material_level_spread_percent;
  json["source"] = g.source;
  json["air_seen"] = g.air_seen;
  json["material_seen"] = g.material_seen;
  json["other_peaks"] = g.other_peaks;
  json["warnings"] = g.warnings;
  json["histogram"] = histogram_json(g.histogram);
  return json;
}

Json part_json(const Inspection& inspection) {
  Json json;
  put_measured(json, "volume", "_mm3", inspection.part_volume_mm3);
  json["surface_area_mm2"] = inspection.surface_area_mm2;
  json["bounds_mm"] = {{"min", to_json(inspection.part_min_mm)}, {"max", to_json(inspection.part_max_mm)}};
  json["has_outside"] = inspection.has_outside;
  json["cut_by_field"] = inspection.part_cut_by_field;
  json["body"] = inspection.body;
  json["bodies"] = Json::array();
  for (const Body& body : inspection.bodies)
    json["bodies"].push_back({{"voxels", body.voxels},
                              {"volume_mm3", body.volume_mm3},
                              {"min_mm", to_json(body.min_mm)},
                              {"max_mm", to_json(body.max_mm)},
                              {"cut_by_field", body.cut_by_field}});
  return json;
}

Json evidence_json(const Evidence& e) {
  Json json;
  json["pore_id"] = e.pore_id > 0 ? Json(e.pore_id) : Json(nullptr);
  json["position_mm"] = e.position_mm ? to_json(*e.position_mm) : Json(nullptr);
  json["extent_mm"] = e.extent_mm;
  json["what"] = e.what;
  return json;
}

Json requirement_json(const RequirementResult& r) {
  const Requirement& q = r.requirement;
  Json json;
  json["id"] = q.id;
  json["zone"] = q.zone;
  json["quantity"] = to_text(q.quantity);
  json["unit"] = r.unit;
  if (q.min) json["min"] = *q.min;
  if (q.max) json["max"] = *q.max;
  if (q.ignore_below_mm) json["ignore_below_mm"] = *q.ignore_below_mm;
  if (q.axis) json["axis"] = std::string(1, "xyz"[std::clamp(*q.axis, 0, 2)]);
  if (q.window_mm) json["window_mm"] = *q.window_mm;
  if (q.reference)
    json["reference"] = {{"shape", q.reference->sphere ? "sphere" : "cube"},
                         {"size_mm", q.reference->size_mm}};
  if (q.relative) json["relative"] = true;
  if (q.percentile) json["percentile"] = *q.percentile;
  json["measured"] = r.has_value ? Json(r.measured.value) : Json(nullptr);
  json["standard_uncertainty"] = r.measured.standard_uncertainty;
  json["expanded_uncertainty"] = r.expanded_uncertainty;
  json["coverage_factor"] = r.coverage_factor;
  json["contributions"] = Json::array();
  for (const Contribution& c : r.measured.contributions)
    json["contributions"].push_back({{"name", c.name}, {"standard_uncertainty", c.standard_uncertainty}});
  json["verdict"] = to_text(r.verdict);
  json["reason"] = r.reason;
  json["evidence"] = evidence_json(r.evidence);
  json["warnings"] = r.warnings;
  return json;
}

Json pores_json(const Inspection& inspection) {
  const PoreSummary& s = inspection.pore_summary;
  Json json;
  json["count"] = s.count;
  json["closed"] = s.closed;
  json["open"] = s.open;
  json["cut_by_field"] = s.cut_by_field;
  json["in_between"] = s.in_between;
  json["diffuse"] = s.diffuse;
  json["inclusions"] = s.inclusions;
  put_measured(json, "volume", "_mm3", s.volume_mm3);
  put_measured(json, "porosity", "_percent", s.porosity_percent);
  json["relative_density_percent"] = 100 - s.porosity_percent.value;
  json["open_porosity_percent"] = s.open_porosity_percent;
  json["smallest_expected_diameter_mm"] = s.smallest_expected_diameter_mm;
  json["table"] = pores_to_columns(inspection.pores);
  return json;
}

Json walls_json(const std::optional<WallSummary>& walls) {
  if (!walls) return nullptr;
  Json json;
  json["any_wall"] = walls->any_wall;
  put_measured(json, "least", "_mm", walls->least_mm);
  json["mean_mm"] = walls->mean_mm;
  json["percentiles"] = Json::array();
  for (const auto& [percent, mm] : walls->percentiles)
    json["percentiles"].push_back({{"percent", percent}, {"thickness_mm", mm}});
  json["spots"] = Json::array();
  for (const WallSpot& spot : walls->spots)
    json["spots"].push_back({{"position_mm", to_json(spot.position_mm)},
                             {"patch_mean_mm", spot.patch_mean_mm},
                             {"least_mm", spot.least_mm},
                             {"area_mm2", spot.area_mm2}});
  return json;
}

std::string now_text() {
  const std::time_t now = std::chrono::system_clock::to_time_t(std::chrono::system_clock::now());
  std::tm utc{};
  gmtime_r(&now, &utc);
  char text[32];
  std::strftime(text, sizeof text, "%Y-%m-%dT%H:%M:%SZ", &utc);
  return text;
}

}  // namespace

std::string result_to_json(const Inspection& inspection, bool timestamp) {
  Json json;
  json["result_version"] = result_version;
  json["program"] = {{"name", program_name()}, {"version", program_version()}};
  if (timestamp) json["written_at"] = now_text();
  json["verdict"] = to_text(inspection.verdict);
  json["serial"] = inspection.serial;
  json["volume"] = volume_json(inspection.volume);
  json["spec"] = spec_json(inspection.spec);
  json["grey_levels"] = levels_json(inspection);
  json["part"] = part_json(inspection);
  json["requirements"] = Json::array();
  for (const RequirementResult& r : inspection.requirements)
    json["requirements"].push_back(requirement_json(r));
  json["pores"] = pores_json(inspection);
  json["wall_thickness"] = walls_json(inspection.walls);
  json["settings"] = text_map(inspection.settings);
  json["not_searched"] = inspection.not_searched;
  json["warnings"] = inspection.warnings;
  return print_json(json);
}

}  // namespace halfmark
