#include "io/spec_zones.h"

#include <algorithm>
#include <map>

#include "io/json_object.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

using nlohmann::json;

// Far beyond any drawing.
constexpr std::size_t most_zone_parts = 100;

class ZoneReader {
 public:
  ZoneReader(const fs::path& folder, std::vector<SpecProblem>& problems)
      : folder_(folder), problems_(problems) {}

  void read(JsonObject& object, InspectionSpec& spec) {
    if (object.has("zones") && !object.raw("zones").is_array()) object.problem("zones", "must be a list");
    std::vector<std::string> places;
    if (object.is_list_up_to("zones", most_spec_entries)) {
      std::size_t i = 0;
      for (const json& entry : object.raw("zones")) {
        std::string place = "zones[" + std::to_string(i++) + "]";
        if (entry.is_object() && entry.contains("id") && entry["id"].is_string())
          place += " (" + entry["id"].get<std::string>() + ")";
        JsonObject zone(entry, place, problems_);
        if (!entry.is_object()) continue;
        ZoneSpec out;
        out.id = zone.required_text("id");
        if (!zone.has("shape")) zone.problem("shape", "is missing");
        read_shape(zone, out);
        const std::string use = zone.choice("use", "inspect", {"inspect", "exclude", "expected_void"});
        out.use = use == "exclude"         ? ZoneUse::exclude
                  : use == "expected_void" ? ZoneUse::expected_void
                                           : ZoneUse::inspect;
        for (const ZoneSpec& other : spec.zones) {
          if (other.id == out.id && !out.id.empty())
            zone.problem("id", "'" + out.id + "' names another zone already");
        }
        spec.zones.push_back(std::move(out));
        places.push_back(zone.place_of("of"));
      }
    }
    check_parts(spec.zones, places);
  }

 private:
  void read_shape(JsonObject& zone, ZoneSpec& out) {
    const std::string shape = zone.choice(
        "shape", "everything",
        {"everything", "box", "cylinder", "sphere", "skin", "mesh", "union", "difference"}, {"wall_band"});
    static const std::map<std::string, std::vector<std::string>> keys{
        {"everything", {}},
        {"box", {"min_mm", "max_mm"}},
        {"cylinder", {"from_mm", "to_mm", "radius_mm"}},
        {"sphere", {"centre_mm", "radius_mm"}},
        {"skin", {"depth_mm"}},
        {"mesh", {"file"}},
        {"union", {"of"}},
        {"difference", {"of"}}};
    // The keys of a shape that is not known cannot be judged by shape.
    const bool known =
        zone.has("shape") && zone.raw("shape").is_string() && zone.raw("shape").get<std::string>() == shape;
    std::vector<std::string> allowed{"id", "shape", "use"};
    for (const auto& [name, of_shape] : keys) {
      if (!known || name == shape) allowed.insert(allowed.end(), of_shape.begin(), of_shape.end());
    }
    zone.allow(allowed);
    const auto radius = [&] {
      if (!zone.has("radius_mm")) zone.problem("radius_mm", "is missing");
      return zone.number_above("radius_mm", 1, 0, false);
    };
    if (shape == "box") {
      out.shape = ZoneShape::box;
      out.min_mm = zone.point("min_mm").value_or(Vec3{0, 0, 0});
      out.max_mm = zone.point("max_mm").value_or(Vec3{1, 1, 1});
      for (std::size_t a = 0; a < 3; ++a) {
        if (!(out.min_mm[a] < out.max_mm[a])) {
          zone.problem("max_mm", "must be above min_mm along every axis");
          break;
        }
      }
    } else if (shape == "cylinder") {
      out.shape = ZoneShape::cylinder;
      out.from_mm = zone.point("from_mm").value_or(Vec3{0, 0, 0});
      out.to_mm = zone.point("to_mm").value_or(Vec3{0, 0, 1});
      if (!(length(out.to_mm - out.from_mm) > 0)) zone.problem("to_mm", "must differ from from_mm");
      out.radius_mm = radius();
    } else if (shape == "sphere") {
      out.shape = ZoneShape::sphere;
      out.centre_mm = zone.point("centre_mm").value_or(Vec3{0, 0, 0});
      out.radius_mm = radius();
    } else if (shape == "skin") {
      out.shape = ZoneShape::skin;
      read_depth(zone, out);
    } else if (shape == "mesh") {
      out.shape = ZoneShape::mesh;
      read_mesh_file(zone, out);
    } else if (shape == "union" || shape == "difference") {
      out.shape = shape == "union" ? ZoneShape::union_of : ZoneShape::difference;
      read_parts(zone, out);
    }
  }

  void read_depth(JsonObject& zone, ZoneSpec& out) {
    if (!zone.has("depth_mm")) {
      zone.problem("depth_mm", "is missing: the depth below the surface, a number or [from, to]");
      return;
    }
    const json& depth = zone.raw("depth_mm");
    if (depth.is_array()) {
      const bool sound = depth.size() == 2 && depth[0].is_number() && depth[1].is_number();
      if (sound) {
        out.from_depth_mm = depth[0].get<double>();
        out.depth_mm = depth[1].get<double>();
      }
      if (!sound || !(out.from_depth_mm >= 0 && out.depth_mm > out.from_depth_mm))
        zone.problem("depth_mm", "must be [from, to] with 0 <= from < to");
    } else {
      out.depth_mm = zone.number_above("depth_mm", 1, 0, false);
    }
  }

  void read_mesh_file(JsonObject& zone, ZoneSpec& out) {
    const std::string name = zone.required_text("file");
    if (name.empty()) return;
    const fs::path base = fs::weakly_canonical(folder_.empty() ? fs::path(".") : folder_),
                   target = fs::weakly_canonical(base / name);
    const auto mismatch = std::mismatch(base.begin(), base.end(), target.begin(), target.end());
    if (fs::path(name).is_absolute() || mismatch.first != base.end()) {
      zone.problem("file", "'" + name + "' does not lie in the spec's folder or below; move it there");
    } else if (!fs::is_regular_file(target)) {
      zone.problem("file", "'" + name + "' does not exist beside the spec");
    }
    out.file = folder_ / name;
  }

  void read_parts(JsonObject& zone, ZoneSpec& out) {
    const bool listed = zone.has("of") && zone.raw("of").is_array() && zone.raw("of").size() >= 1;
    if (listed && zone.raw("of").size() > most_zone_parts) {
      zone.problem("of", "lists more than " + std::to_string(most_zone_parts) + " zones");
    } else if (listed) {
      for (const json& id : zone.raw("of")) {
        if (!id.is_string()) zone.problem("of", "must be a list of zone ids");
        if (id.is_string()) out.of.push_back(id.get<std::string>());
      }
    } else {
      zone.problem("of", "must be a list of zone ids");
    }
  }

  // Parts that do not exist, and zones that are parts of themselves. `places`: of each zone's key `of`.
  void check_parts(const std::vector<ZoneSpec>& zones, const std::vector<std::string>& places) {
    std::vector<std::string> ids;
    std::map<std::string, std::size_t> numbers;
    for (const ZoneSpec& zone : zones) {
      numbers.try_emplace(zone.id, ids.size());
      ids.push_back(zone.id);
    }
    std::vector<std::vector<std::size_t>> parts(zones.size());
    for (std::size_t i = 0; i < zones.size(); ++i) {
      for (const std::string& id : zones[i].of) {
        const auto found = numbers.find(id);
        if (found == numbers.end()) {
          if (problems_.size() < most_spec_problems)
            problems_.push_back({places[i], "unknown zone '" + id + "'" + suggestion(id, ids)});
        } else {
          parts[i].push_back(found->second);
        }
      }
    }
    for (std::size_t i = 0; i < zones.size(); ++i) {
      std::vector<std::size_t> open = parts[i];
      std::vector<bool> seen(zones.size());
      while (!open.empty() && !seen[i]) {
        const std::size_t part = open.back();
        open.pop_back();
        if (seen[part]) continue;
        seen[part] = true;
        open.insert(open.end(), parts[part].begin(), parts[part].end());
      }
      if (seen[i]) problems_.push_back({places[i], "leads back to the zone itself"});
    }
  }

  fs::path folder_;
  std::vector<SpecProblem>& problems_;
};

}  // namespace

void read_spec_zones(JsonObject& object, const fs::path& folder, std::vector<SpecProblem>& problems,
                     InspectionSpec& spec) {
  ZoneReader(folder, problems).read(object, spec);
}

}  // namespace halfmark
