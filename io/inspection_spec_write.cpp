#include <nlohmann/json.hpp>

#include "io/inspection_spec.h"

namespace halfmark {

namespace {

using nlohmann::ordered_json;

const char* name_of(ZoneShape shape) {
  switch (shape) {
    case ZoneShape::everything:
      return "everything";
    case ZoneShape::box:
      return "box";
    case ZoneShape::cylinder:
      return "cylinder";
    case ZoneShape::sphere:
      return "sphere";
    case ZoneShape::skin:
      return "skin";
    case ZoneShape::mesh:
      return "mesh";
    case ZoneShape::union_of:
      return "union";
    case ZoneShape::difference:
      break;
  }
  return "difference";
}

ordered_json to_json(const ZoneSpec& zone, const std::filesystem::path& folder) {
  ordered_json out;
  out["id"] = zone.id;
  out["shape"] = name_of(zone.shape);
  if (zone.shape == ZoneShape::box) {
    out["min_mm"] = zone.min_mm;
    out["max_mm"] = zone.max_mm;
  } else if (zone.shape == ZoneShape::cylinder) {
    out["from_mm"] = zone.from_mm;
    out["to_mm"] = zone.to_mm;
    out["radius_mm"] = zone.radius_mm;
  } else if (zone.shape == ZoneShape::sphere) {
    out["centre_mm"] = zone.centre_mm;
    out["radius_mm"] = zone.radius_mm;
  } else if (zone.shape == ZoneShape::skin) {
    out["depth_mm"] = zone.from_depth_mm > 0 ? ordered_json{zone.from_depth_mm, zone.depth_mm}
                                             : ordered_json(zone.depth_mm);
  } else if (zone.shape == ZoneShape::mesh) {
    out["file"] = (folder.empty() ? zone.file : zone.file.lexically_relative(folder)).generic_string();
  } else if (!zone.of.empty()) {
    out["of"] = zone.of;
  }
  if (zone.use != ZoneUse::inspect) out["use"] = zone.use == ZoneUse::exclude ? "exclude" : "expected_void";
  return out;
}

ordered_json to_json(const Requirement& r) {
  ordered_json out;
  out["id"] = r.id;
  out["zone"] = r.zone;
  out["quantity"] = to_text(r.quantity);
  if (r.min) out["min"] = *r.min;
  if (r.max) out["max"] = *r.max;
  if (r.ignore_below_mm) out["ignore_below_mm"] = *r.ignore_below_mm;
  if (r.axis) out["axis"] = std::string(1, "xyz"[*r.axis]);
  if (r.window_mm) out["window_mm"] = *r.window_mm;
  if (r.reference)
    out["reference"] = {{"shape", r.reference->sphere ? "sphere" : "cube"},
                        {"size_mm", r.reference->size_mm}};
  if (r.relative) out["relative"] = true;
  if (r.percentile) out["percentile"] = *r.percentile;
  return out;
}

}  // namespace

std::string spec_to_json(const InspectionSpec& spec) {
  ordered_json out;
  out["spec_version"] = spec.version;
  if (!spec.title.empty()) out["title"] = spec.title;
  ordered_json part = ordered_json::object();
  for (const auto& [key, text] : {std::pair<const char*, const std::string&>{"name", spec.part.name},
                                  {"drawing", spec.part.drawing},
                                  {"revision", spec.part.revision},
                                  {"material", spec.part.material},
                                  {"customer_order", spec.part.customer_order}}) {
    if (!text.empty()) part[key] = text;
  }
  if (!part.empty()) out["part"] = part;
  out["grey_levels"]["air"] =
      spec.grey_levels.air ? ordered_json(*spec.grey_levels.air) : ordered_json("auto");
  out["grey_levels"]["material"] =
      spec.grey_levels.material ? ordered_json(*spec.grey_levels.material) : ordered_json("auto");
  out["surface"]["method"] = "iso50";
  out["pores"] = {{"method", spec.pores.method == PoreMethod::local ? "local" : "iso50"},
                  {"min_voxels", spec.pores.min_voxels},
                  {"open_closing_radius_mm", spec.pores.open_closing_radius_mm},
                  {"open_min_depth_mm", spec.pores.open_min_depth_mm},
                  {"inclusions", spec.pores.inclusions}};
  out["wall_thickness"] = {{"method", "inscribed_sphere"},
                           {"max_mm", spec.walls.max_mm},
                           {"patch_mm2", spec.walls.patch_mm2},
                           {"pores_split_walls", spec.walls.pores_split_walls}};
  out["zones"] = ordered_json::array();
  for (const ZoneSpec& zone : spec.zones) out["zones"].push_back(to_json(zone, spec.file.parent_path()));
  out["requirements"] = ordered_json::array();
  for (const Requirement& r : spec.requirements) out["requirements"].push_back(to_json(r));
  out["decision"]["rule"] = spec.decision.rule == DecisionRule::guarded ? "guarded" : "simple";
  if (spec.decision.coverage_factor) out["decision"]["coverage_factor"] = *spec.decision.coverage_factor;
  if (spec.decision.conformance_probability)
    out["decision"]["conformance_probability"] = *spec.decision.conformance_probability;
  return out.dump(2, ' ', false, ordered_json::error_handler_t::replace) + "\n";
}

}  // namespace halfmark
