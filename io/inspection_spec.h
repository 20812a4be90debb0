// The inspection spec: what the drawing demands and how it is to be measured, read from JSON.
// Validation against spec.schema.json and everything a schema cannot say happens in parse_spec.
#pragma once

#include <array>
#include <filesystem>
#include <optional>
#include <string>
#include <vector>

#include "io/vec3.h"

namespace halfmark {

struct PartText {
  std::string name, drawing, revision, material, customer_order;  // free text, shown in the report
};

struct GreySpec {
  std::optional<double> air, material;  // grey values; empty: found in the histogram
};

enum class PoreMethod { local, iso50 };

struct PoreSpec {
  PoreMethod method = PoreMethod::local;
  std::int64_t min_voxels = 8;          // label voxels, >= 1
  double open_closing_radius_mm = 0.5;  // > 0: the ball that closes a pore's mouth
  double open_min_depth_mm = 0.2;       // >= 0
  bool inclusions = false;              // look for denser-than-material regions too
};

struct WallSpec {
  double max_mm = 8.0;      // > 0: thicker places are reported as ">= max"
  double patch_mm2 = 0.25;  // > 0: a wall is the mean over a patch of this area
  bool pores_split_walls = false;
};

enum class ZoneShape { everything, box, cylinder, sphere, skin, mesh, union_of, difference };
enum class ZoneUse { inspect, exclude, expected_void };

struct ZoneSpec {
  std::string id;
  ZoneShape shape = ZoneShape::everything;
  ZoneUse use = ZoneUse::inspect;
  Vec3 min_mm{}, max_mm{};                 // box
  Vec3 from_mm{}, to_mm{};                 // cylinder axis, flat ends
  Vec3 centre_mm{};                        // sphere
  double radius_mm = 0;                    // cylinder, sphere
  double from_depth_mm = 0, depth_mm = 0;  // skin: depths in [from_depth_mm, depth_mm] below the surface
  std::filesystem::path file;              // mesh: a closed STL, resolved against the spec's folder
  std::vector<std::string> of;             // union: any of; difference: the first without the others
};

enum class Quantity {
  porosity,
  section_porosity,
  local_porosity,
  pore_count,
  pore_density,
  pore_diameter,
  pore_length,
  pore_spacing,
  pore_nest,
  pore_depth,
  open_porosity,
  inclusion_diameter,
  inclusion_count,
  wall_thickness,
  material_volume,
  surface_area
};

struct ReferenceBody {  // local_porosity's moving body
  bool sphere = false;  // else a cube
  double size_mm = 0;   // edge or diameter, > 0
};

struct Requirement {
  std::string id, zone;
  Quantity quantity = Quantity::porosity;
  std::optional<double> min, max;
  std::optional<double> ignore_below_mm;   // pores of smaller equivalent diameter do not count
  std::optional<int> axis;                 // section_porosity: 0, 1, 2; empty: the worst of the three
  std::optional<double> window_mm;         // section_porosity: edge of a square reference area
  std::optional<ReferenceBody> reference;  // local_porosity
  bool relative = false;                   // pore_spacing: in multiples of the smaller neighbour's diameter
  std::optional<double> percentile;        // wall_thickness: instead of the least patch
};

enum class DecisionRule { simple, guarded };

struct DecisionSpec {
  DecisionRule rule = DecisionRule::guarded;
  std::optional<double> coverage_factor;          // k > 0; default 2 when no probability is given
  std::optional<double> conformance_probability;  // in (0.5, 1), one-sided
};

struct InspectionSpec {
  int version = 1;
  std::string title;
  PartText part;
  GreySpec grey_levels;
  PoreSpec pores;
  WallSpec walls;
  std::vector<ZoneSpec> zones;  // "part" (everything) is added when the spec names it but does not define it
  std::vector<Requirement> requirements;  // at least one
  DecisionSpec decision;
  std::string sha256;  // of the file's bytes; empty when made in memory
  std::filesystem::path file;
};

struct SpecProblem {
  std::string place;     // JSON pointer with words: "requirements[1] (R2).quantity"
  std::string sentence;  // what is wrong and what is meant: "unknown key 'maximum'; did you mean 'max'?"
};

// Every problem of the text, in the file's order; empty when the spec is sound. Never throws for bad text.
std::vector<SpecProblem> check_spec_text(const std::string& json_text, const std::filesystem::path& folder);

// Reads and validates. Throws Problem(input_missing) or Problem(bad_data) that lists every SpecProblem, one a
// line.
InspectionSpec read_spec(const std::filesystem::path& path);
InspectionSpec parse_spec(const std::string& json_text, const std::filesystem::path& folder);
// The spec as JSON that read_spec accepts and that gives the same spec again.
std::string spec_to_json(const InspectionSpec& spec);

const char* to_text(Quantity q);                         // "pore_diameter"
const char* unit_of(Quantity q, bool relative = false);  // "mm", "%", "1/cm³", "" ...

}  // namespace halfmark
