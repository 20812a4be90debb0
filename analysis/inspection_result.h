// The finished inspection as one plain value: what reports, command line and viewer show. No voxels.
#pragma once

#include <map>
#include <optional>
#include <string>
#include <vector>

#include "analysis/grey_levels.h"
#include "analysis/part_map.h"
#include "analysis/pores.h"
#include "analysis/wall_thickness.h"
#include "io/inspection_spec.h"
#include "io/volume_source.h"

namespace halfmark {

struct Evidence {
  std::int32_t pore_id = 0;         // 0: no single pore
  std::optional<Vec3> position_mm;  // the deciding place
  double extent_mm = 0;             // size of what is to be seen there (pore length, window, wall)
  std::string what;                 // "pore 3", "section z = 12.3 mm", "thin wall"
};

struct RequirementResult {
  Requirement requirement;
  std::string unit;
  bool has_value = false;          // false: nothing to measure (then `reason` says why)
  bool met_without_value = false;  // nothing was found that could break the limit; `reason` says so
  bool lower_bound = false;        // the value can only be larger (a pore cut by the field)
  bool beyond_the_scan = false;    // the limit lies below what this scan can show; a warning says so
  Measured measured;               // in `unit`
  double expanded_uncertainty = 0;
  double coverage_factor = 2;
  Verdict verdict = Verdict::undecided;
  std::string reason;  // one plain sentence
  Evidence evidence;
  std::vector<std::string> warnings;  // e.g. limit below what the scan can show
};

struct VolumeText {
  std::string file, format, sha256, voxel_type;
  VolumeGeometry geometry;
  std::map<std::string, std::string> scan;
  double field_share = 1;  // share of voxels inside the field of view
};

struct PoreSummary {
  std::int64_t count = 0, closed = 0, open = 0, cut_by_field = 0, inclusions = 0, in_between = 0, diffuse = 0;
  Measured volume_mm3;  // all but inclusions
  Measured porosity_percent;
  double open_porosity_percent = 0;
  double smallest_expected_diameter_mm = 0;
};

struct Inspection {
  Verdict verdict = Verdict::undecided;
  std::string serial;
  VolumeText volume;
  InspectionSpec spec;
  GreyLevels grey_levels;
  double material_level_spread_percent = 0;
  std::vector<Body> bodies;
  int body = 1;
  bool has_outside = true, part_cut_by_field = false;
  Measured part_volume_mm3;  // material
  double surface_area_mm2 = 0;
  Vec3 part_min_mm{}, part_max_mm{};
  std::vector<RequirementResult> requirements;
  std::vector<Pore> pores;  // largest first; without those left out
  PoreSummary pore_summary;
  std::optional<WallSummary> walls;
  std::map<std::string, std::string> settings;  // what was used, as text
  std::vector<std::string> not_searched;        // plain sentences
  std::vector<std::string> warnings;
};

const char* to_text(Verdict v);     // "accept"
const char* to_text(PoreKind k);    // "closed", "open", "cut_by_field", ...
const char* to_text(ShapeClass s);  // "round", ..., "" when unclassified

}  // namespace halfmark
