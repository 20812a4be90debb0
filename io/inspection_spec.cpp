#include "io/inspection_spec.h"

#include <algorithm>
#include <cmath>
#include <fstream>
#include <iterator>
#include <map>
#include <set>

#include "io/json_object.h"
#include "io/problem.h"
#include "io/spec_schema.h"
#include "io/spec_zones.h"
#include "io/volume_open.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

using nlohmann::json;

constexpr std::uintmax_t largest_spec = 4u << 20;
constexpr int deepest_nesting = 32;
constexpr std::size_t most_values = 100000;

struct QuantityRule {
  Quantity quantity;
  const char* name;
  const char* unit;
  bool allows_min, allows_max;
  bool of_pores;  // ignore_below_mm makes sense
};

const std::vector<QuantityRule>& rules() {
  static const std::vector<QuantityRule> table{
      {Quantity::porosity, "porosity", "%", false, true, true},
      {Quantity::section_porosity, "section_porosity", "%", false, true, true},
      {Quantity::local_porosity, "local_porosity", "%", false, true, true},
      {Quantity::pore_count, "pore_count", "", false, true, true},
      {Quantity::pore_density, "pore_density", "1/cm³", false, true, true},
      {Quantity::pore_diameter, "pore_diameter", "mm", false, true, true},
      {Quantity::pore_length, "pore_length", "mm", false, true, true},
      {Quantity::pore_spacing, "pore_spacing", "mm", true, false, true},
      {Quantity::pore_nest, "pore_nest", "mm", false, true, true},
      {Quantity::pore_depth, "pore_depth", "mm", true, false, true},
      {Quantity::open_porosity, "open_porosity", "%", false, true, true},
      {Quantity::inclusion_diameter, "inclusion_diameter", "mm", false, true, true},
      {Quantity::inclusion_count, "inclusion_count", "", false, true, true},
      {Quantity::wall_thickness, "wall_thickness", "mm", true, true, false},
      {Quantity::material_volume, "material_volume", "mm³", true, true, false},
      {Quantity::surface_area, "surface_area", "mm²", true, true, false}};
  return table;
}

const QuantityRule& rule_of(Quantity q) {
  return *std::find_if(rules().begin(), rules().end(),
                       [q](const QuantityRule& r) { return r.quantity == q; });
}

std::vector<std::string> quantity_names() {
  std::vector<std::string> out;
  for (const QuantityRule& r : rules()) out.emplace_back(r.name);
  return out;
}

// Nesting of brackets outside of texts: a bomb of brackets is refused before it is parsed.
int nesting_of(const std::string& text) {
  int depth = 0, deepest = 0;
  bool in_text = false;
  for (std::size_t i = 0; i < text.size(); ++i) {
    const char c = text[i];
    if (in_text) {
      if (c == '\\') ++i;
      if (c == '"') in_text = false;
    } else if (c == '"') {
      in_text = true;
    } else if (c == '[' || c == '{') {
      deepest = std::max(deepest, ++depth);
    } else if (c == ']' || c == '}') {
      --depth;
    }
  }
  return deepest;
}

std::size_t value_count(const json& value) {
  std::size_t count = 1;
  if (value.is_structured()) {
    for (const json& member : value) count += value_count(member);
  }
  return count;
}

std::string line_and_column(const std::string& text, std::size_t byte) {
  const std::size_t end = std::min(byte > 0 ? byte - 1 : 0, text.size());
  const auto line = 1 + std::count(text.begin(), text.begin() + static_cast<std::ptrdiff_t>(end), '\n');
  const std::size_t start = text.rfind('\n', end == 0 ? 0 : end - 1);
  return "line " + std::to_string(line) + ", column " +
         std::to_string(end - (start == std::string::npos || end == 0 ? 0 : start + 1) + 1);
}

class SpecReader {
 public:
  SpecReader(const fs::path& folder, std::vector<SpecProblem>& problems, bool with_schema)
      : folder_(folder), problems_(problems), with_schema_(with_schema) {}

  InspectionSpec read(const std::string& text) {
    InspectionSpec spec;
    if (text.size() > largest_spec)
      return fail(spec, "file", "is larger than 4 MiB; this is no inspection spec");
    if (nesting_of(text) > deepest_nesting)
      return fail(spec, "file", "is nested too deeply; this is no inspection spec");
    json root;
    try {
      root = parse(text);
    } catch (const json::exception& error) {
      std::string what = error.what();
      const std::size_t colon = what.find("] ");
      const auto* parse_error = dynamic_cast<const json::parse_error*>(&error);
      return fail(spec, parse_error != nullptr ? line_and_column(text, parse_error->byte) : "file",
                  "is not valid JSON: " + (colon == std::string::npos ? what : what.substr(colon + 2)));
    }
    if (value_count(root) > most_values)
      return fail(spec, "file",
                  "holds more than " + std::to_string(most_values) + " values; this is no inspection spec");
    if (doubled_.size() > most_spec_problems) doubled_.resize(most_spec_problems);
    for (const std::string& key : doubled_) problems_.push_back({key, "stands twice in the same object"});
    JsonObject object(root, "", problems_);
    if (!root.is_object()) return spec;
    read_all(object, spec);
    if (with_schema_ && problems_.size() < most_spec_problems) add_unnamed(problems_, schema_problems(root));
    return spec;
  }

 private:
  void read_all(JsonObject& object, InspectionSpec& spec) {
    object.allow({"spec_version", "title", "part", "grey_levels", "surface", "pores", "wall_thickness",
                  "zones", "requirements", "decision", "$schema"},
                 {"scale", "alignment", "nominal", "features", "temperature", "scan"});
    read_head(object, spec);
    read_methods(object, spec);
    read_spec_zones(object, folder_, problems_, spec);
    read_requirements(object, spec);
    read_decision(object, spec);
  }

  InspectionSpec fail(InspectionSpec& spec, const std::string& place, const std::string& sentence) {
    problems_.push_back({place, sentence});
    return spec;
  }

  // Parses and notes keys that stand twice.
  json parse(const std::string& text) {
    std::vector<std::set<std::string>> open;
    const json::parser_callback_t watch = [&](int, json::parse_event_t event, json& value) {
      if (event == json::parse_event_t::object_start) open.emplace_back();
      if (event == json::parse_event_t::object_end && !open.empty()) open.pop_back();
      if (event == json::parse_event_t::key && !open.empty() &&
          !open.back().insert(value.get<std::string>()).second)
        doubled_.push_back(value.get<std::string>());
      return true;
    };
    return json::parse(text, watch);
  }

  void read_head(JsonObject& object, InspectionSpec& spec) {
    if (!object.has("spec_version")) {
      object.problem("spec_version", "is missing; write 1");
    } else if (const auto version = object.number("spec_version"); version && *version != 1) {
      object.problem("spec_version", "only version 1 is read");
    }
    spec.title = object.text("title");
    object.text("$schema");
    if (!object.has("part")) return;
    JsonObject part(object.raw("part"), "part", problems_);
    part.allow({"name", "drawing", "revision", "material", "customer_order"});
    spec.part = {part.text("name"), part.text("drawing"), part.text("revision"), part.text("material"),
                 part.text("customer_order")};
  }

  std::optional<double> level(JsonObject& levels, const std::string& key) {
    if (!levels.has(key)) return std::nullopt;
    if (levels.raw(key).is_string()) {
      if (levels.raw(key).get<std::string>() != "auto")
        levels.problem(key, "must be \"auto\" or a grey value");
      return std::nullopt;
    }
    return levels.number(key);
  }

  void read_methods(JsonObject& object, InspectionSpec& spec) {
    if (object.has("grey_levels")) {
      JsonObject levels(object.raw("grey_levels"), "grey_levels", problems_);
      levels.allow({"air", "material"});
      spec.grey_levels = {level(levels, "air"), level(levels, "material")};
      if (spec.grey_levels.air && spec.grey_levels.material &&
          !(*spec.grey_levels.air < *spec.grey_levels.material))
        levels.problem("material", "must lie above the air level");
    }
    if (object.has("surface")) {
      JsonObject surface(object.raw("surface"), "surface", problems_);
      surface.allow({"method"});
      surface.choice("method", "iso50", {"iso50"}, {"local"});
    }
    if (object.has("pores")) {
      JsonObject pores(object.raw("pores"), "pores", problems_);
      pores.allow({"method", "min_voxels", "open_closing_radius_mm", "open_min_depth_mm", "inclusions"});
      spec.pores.method = pores.choice("method", "local", {"local", "iso50"}) == "iso50" ? PoreMethod::iso50
                                                                                         : PoreMethod::local;
      const double voxels = pores.number_above("min_voxels", 8, 1, true);
      if (voxels != std::floor(voxels) || voxels > 1e12)
        pores.problem("min_voxels", "must be a whole number");
      spec.pores.min_voxels = static_cast<std::int64_t>(std::min(voxels, 1e12));
      spec.pores.open_closing_radius_mm = pores.number_above("open_closing_radius_mm", 0.5, 0, false);
      spec.pores.open_min_depth_mm = pores.number_above("open_min_depth_mm", 0.2, 0, true);
      spec.pores.inclusions = pores.flag("inclusions", false);
    }
    if (object.has("wall_thickness")) {
      JsonObject walls(object.raw("wall_thickness"), "wall_thickness", problems_);
      walls.allow({"method", "max_mm", "patch_mm2", "pores_split_walls"});
      walls.choice("method", "inscribed_sphere", {"inscribed_sphere"}, {"opposite_surface"});
      spec.walls.max_mm = walls.number_above("max_mm", 8, 0, false);
      spec.walls.patch_mm2 = walls.number_above("patch_mm2", 0.25, 0, false);
      spec.walls.pores_split_walls = walls.flag("pores_split_walls", false);
    }
  }

  void read_requirements(JsonObject& object, InspectionSpec& spec) {
    if (!object.has("requirements") || !object.raw("requirements").is_array() ||
        object.raw("requirements").empty()) {
      object.problem("requirements",
                     "must be a list of at least one requirement; without one nothing can be decided");
      return;
    }
    if (!object.is_list_up_to("requirements", most_spec_entries)) return;
    std::size_t i = 0;
    for (const json& entry : object.raw("requirements")) {
      std::string place = "requirements[" + std::to_string(i++) + "]";
      if (entry.is_object() && entry.contains("id") && entry["id"].is_string())
        place += " (" + entry["id"].get<std::string>() + ")";
      JsonObject requirement(entry, place, problems_);
      if (entry.is_object()) read_requirement(requirement, spec);
    }
  }

  void read_requirement(JsonObject& object, InspectionSpec& spec) {
    object.allow({"id", "zone", "quantity", "min", "max", "ignore_below_mm", "axis", "window_mm", "reference",
                  "relative", "percentile"});
    Requirement out;
    out.id = object.required_text("id");
    for (const Requirement& other : spec.requirements) {
      if (other.id == out.id && !out.id.empty())
        object.problem("id", "'" + out.id + "' names another requirement already");
    }
    out.zone = object.required_text("zone");
    if (!out.zone.empty()) check_zone(object, out.zone, spec);
    if (!object.has("quantity")) object.problem("quantity", "is missing");
    const std::string name =
        object.choice("quantity", "porosity", quantity_names(), {"dimension", "form", "surface_deviation"});
    const auto rule =
        std::find_if(rules().begin(), rules().end(), [&](const QuantityRule& r) { return r.name == name; });
    out.quantity = rule->quantity;
    out.min = object.number("min");
    out.max = object.number("max");
    const bool known = object.has("quantity") && object.raw("quantity").is_string() &&
                       object.raw("quantity").get<std::string>() == rule->name;
    if (known) check_limits(object, out, *rule);
    read_details(object, out, *rule);
    spec.requirements.push_back(std::move(out));
  }

  void check_zone(JsonObject& object, const std::string& id, InspectionSpec& spec) {
    std::vector<std::string> ids{"part"};
    for (const ZoneSpec& zone : spec.zones) {
      if (zone.id == id && zone.use != ZoneUse::inspect)
        object.problem(
            "zone",
            "'" + id + "' is left out of the inspection (use); a requirement needs a zone that is inspected");
      if (zone.id == id) return;
      ids.push_back(zone.id);
    }
    if (id != "part") {
      object.problem("zone", "unknown zone '" + id + "'" + suggestion(id, ids));
      return;
    }
    ZoneSpec everything;
    everything.id = "part";
    spec.zones.push_back(everything);
  }

  void check_limits(JsonObject& object, const Requirement& r, const QuantityRule& rule) {
    if (r.min && !rule.allows_min) object.problem("min", std::string(rule.name) + " takes a 'max' only");
    if (r.max && !rule.allows_max) object.problem("max", std::string(rule.name) + " takes a 'min' only");
    if (!object.has("min") && !object.has("max"))
      object.problem("",
                     std::string("needs a limit: ") +
                         (rule.allows_max ? (rule.allows_min ? "'min', 'max' or both" : "'max'") : "'min'"));
    if (r.min && r.max && *r.min > *r.max) object.problem("min", "lies above max");
    if ((r.min && *r.min < 0) || (r.max && *r.max < 0))
      object.problem(r.min && *r.min < 0 ? "min" : "max", "must not be negative");
  }

  void read_details(JsonObject& object, Requirement& out, const QuantityRule& rule) {
    const auto only_for = [&](const std::string& key, bool fits, const char* whom) {
      if (object.has(key) && !fits) object.problem(key, std::string("only makes sense for ") + whom);
      return object.has(key) && fits;
    };
    if (only_for("ignore_below_mm", rule.of_pores, "quantities of pores and inclusions"))
      out.ignore_below_mm = object.number_above("ignore_below_mm", 0, 0, true);
    if (only_for("axis", out.quantity == Quantity::section_porosity, "section_porosity")) {
      const std::string axis = object.choice("axis", "x", {"x", "y", "z"});
      out.axis = axis == "x" ? 0 : axis == "y" ? 1 : 2;
    }
    if (only_for("window_mm", out.quantity == Quantity::section_porosity, "section_porosity"))
      out.window_mm = object.number_above("window_mm", 1, 0, false);
    if (only_for("relative", out.quantity == Quantity::pore_spacing, "pore_spacing"))
      out.relative = object.flag("relative", false);
    if (only_for("percentile", out.quantity == Quantity::wall_thickness, "wall_thickness")) {
      out.percentile = object.number_above("percentile", 1, 0, false);
      if (*out.percentile >= 100) object.problem("percentile", "must lie between 0 and 100");
    }
    if (out.quantity == Quantity::wall_thickness && out.max && !out.min && !out.percentile) {
      object.problem(
          "max",
          "needs a percentile beside it: without one the least wall is measured; for \"no wall thicker "
          "than\" give e.g. \"percentile\": 99");
    }
    const bool local = out.quantity == Quantity::local_porosity;
    if (only_for("reference", local, "local_porosity")) {
      JsonObject reference(object.raw("reference"), object.place_of("reference"), problems_);
      reference.allow({"shape", "size_mm"});
      ReferenceBody body;
      body.sphere = reference.choice("shape", "cube", {"cube", "sphere"}) == "sphere";
      if (!reference.has("size_mm")) reference.problem("size_mm", "is missing");
      body.size_mm = reference.number_above("size_mm", 1, 0, false);
      out.reference = body;
    } else if (local) {
      object.problem("reference", R"(is missing: the moving body, {"shape": "cube", "size_mm": 3})");
    }
  }

  void read_decision(JsonObject& object, InspectionSpec& spec) {
    if (!object.has("decision")) return;
    JsonObject decision(object.raw("decision"), "decision", problems_);
    decision.allow({"rule", "coverage_factor", "conformance_probability"});
    spec.decision.rule = decision.choice("rule", "guarded", {"guarded", "simple"}) == "simple"
                             ? DecisionRule::simple
                             : DecisionRule::guarded;
    if (decision.has("coverage_factor"))
      spec.decision.coverage_factor = decision.number_above("coverage_factor", 2, 0, false);
    if (decision.has("conformance_probability")) {
      const auto p = decision.number("conformance_probability");
      if (p && !(*p > 0.5 && *p < 1))
        decision.problem("conformance_probability", "must lie between 0.5 and 1");
      spec.decision.conformance_probability = p;
    }
    if (decision.has("coverage_factor") && decision.has("conformance_probability"))
      decision.problem("coverage_factor", "give either it or conformance_probability, not both");
  }

  fs::path folder_;
  std::vector<SpecProblem>& problems_;
  bool with_schema_;
  std::vector<std::string> doubled_;
};

}  // namespace

std::vector<SpecProblem> check_spec_text(const std::string& json_text, const fs::path& folder) {
  std::vector<SpecProblem> problems;
  SpecReader(folder, problems, true).read(json_text);
  return problems;
}

std::vector<SpecProblem> reader_problems(const std::string& json_text, const fs::path& folder) {
  std::vector<SpecProblem> problems;
  SpecReader(folder, problems, false).read(json_text);
  return problems;
}

InspectionSpec parse_spec(const std::string& json_text, const fs::path& folder) {
  std::vector<SpecProblem> problems;
  InspectionSpec spec = SpecReader(folder, problems, true).read(json_text);
  if (problems.empty()) return spec;
  std::string all;
  for (const SpecProblem& p : problems) all += (all.empty() ? "" : "\n") + p.place + ": " + p.sentence;
  throw Problem(ExitStatus::bad_data, all);
}

InspectionSpec read_spec(const fs::path& path) {
  std::error_code error;
  const std::uintmax_t size = fs::file_size(path, error);
  if (error) throw Problem(ExitStatus::input_missing, path.string() + ": cannot be read: " + error.message());
  if (size > largest_spec)
    throw Problem(ExitStatus::bad_data, path.string() + ": is larger than 4 MiB; this is no inspection spec");
  std::ifstream in(path, std::ios::binary);
  if (!in) throw Problem(ExitStatus::input_missing, path.string() + ": cannot be opened for reading");
  const std::string text{std::istreambuf_iterator<char>(in), {}};
  try {
    InspectionSpec spec = parse_spec(text, path.parent_path());
    spec.file = path;
    spec.sha256 = sha256_of_files({path});
    return spec;
  } catch (const Problem& problem) {
    const std::string what = problem.what();
    throw Problem(problem.status(),
                  path.string() + (what.find('\n') == std::string::npos ? ": " : ":\n") + what);
  }
}

const char* to_text(Quantity q) { return rule_of(q).name; }

const char* unit_of(Quantity q, bool relative) {
  return relative && q == Quantity::pore_spacing ? "" : rule_of(q).unit;
}

}  // namespace halfmark
