// What the measures of one requirement share: which pores count, sums over the zone, the result that is
// filled. The measures themselves are in porosity_measures.cpp, pore_measures.cpp, pore_group_measures.cpp
// and part_measures.cpp; requirement_measures.cpp chooses between them.
//
// Which pores count: those whose centre lies in the zone, not left out, not excluded by an inspector, of at
// least ignore_below_mm. Volumes are clipped at the zone. Diffuse regions count to porosities with their
// deficit, not to sizes, numbers and gaps; in-between grey counts to none of them; inclusions to inclusion
// quantities only.
#pragma once

#include <string>
#include <vector>

#include "analysis/number_text.h"
#include "analysis/requirement_measures.h"
#include "analysis/zone_sums.h"

namespace halfmark {

// A caliper between two sides that are each placed to about a quarter of a voxel: a first estimate.
constexpr double caliper_voxels = 0.35;

// Neither inclusion nor in-between grey.
bool is_void(const Pore& pore);
// Of the kinds that sizes, numbers and gaps of pores, or of inclusions, are taken of.
bool counts_to_sizes(const Pore& pore, bool inclusions);

class RequirementContext {
 public:
  RequirementContext(const Requirement& requirement, const InspectionSpec& spec, const ZoneSet& zones,
                     const MeasuredPart& measured, const RunControl& control);

  const Requirement& requirement;
  const InspectionSpec& spec;
  const ZoneSet& zones;
  const MeasuredPart& measured;
  const RunControl& control;
  const std::size_t zone;

  std::vector<const Pore*> pores;    // that count, with a centre in the zone; largest first
  std::vector<std::uint8_t> counts;  // per id: counts to porosities (anywhere)
  // Per id: would count or not count if its diameter were wrong by its expanded uncertainty (k = 2).
  std::vector<std::uint8_t> near_size_limit;
  RequirementResult result;

  double voxel_mm() const { return measured.geometry.voxel_mm(); }
  bool any_cut() const;
  bool in_zone(const Pore& pore) const;
  // The zone takes in the whole part: nothing is left out of it.
  bool whole_part() const;

  void set(double value, std::vector<Contribution> contributions);
  void point_at(const Pore& pore, const std::string& what);
  void none(const std::string& reason, bool met);

  ZoneSums zone_sums() const;
  // Summed pore share with its uncertainty, in voxels. Noise and local level are each pore's own and add in
  // squares; threshold and edge position err alike in all pores and add in full.
  struct Total {
    double voxels = 0;
    std::vector<Contribution> contributions;
    const Pore* largest = nullptr;
    std::int64_t count = 0;  // pores with a share
  };
  Total total(const ZoneSums& sums, bool only_open) const;
};

// porosity_measures.cpp
void measure_porosity(RequirementContext& c, bool only_open);
void measure_section_porosity(RequirementContext& c);
void measure_local_porosity(RequirementContext& c);
// pore_measures.cpp
void measure_count(RequirementContext& c);
void measure_density(RequirementContext& c);
void measure_diameter(RequirementContext& c);
void measure_length(RequirementContext& c);
void measure_least_depth(RequirementContext& c);
// pore_group_measures.cpp
void measure_gap(RequirementContext& c);
void measure_nest(RequirementContext& c);
// part_measures.cpp
void measure_wall(RequirementContext& c);
void measure_material_volume(RequirementContext& c);
void measure_surface_area(RequirementContext& c);

}  // namespace halfmark
