// Pores by their neighbours: the least gap between two, and nests. Both take the gaps between the pores'
// surfaces (pore_spacing.h), so that they agree.
#include <algorithm>
#include <cmath>
#include <numeric>

#include "analysis/pore_spacing.h"
#include "analysis/requirement_context.h"

namespace halfmark {

namespace {

const Pore& pore_of(const RequirementContext& c, std::int32_t id) {
  return c.measured.pores.pores[static_cast<std::size_t>(id) - 1];
}

// Counts as a neighbour, in the zone or not.
bool is_counted(const RequirementContext& c, const Pore& pore) {
  return c.counts[static_cast<std::size_t>(pore.id)] != 0 && counts_to_sizes(pore, false);
}

// Gaps of all pairs of counted pores up to the smaller of two reaches; reach(pore) in mm.
template <class F>
std::vector<PoreGap> gaps_within(const RequirementContext& c, F reach) {
  std::vector<double> reach_mm;
  for (const Pore& pore : c.measured.pores.pores) reach_mm.push_back(is_counted(c, pore) ? reach(pore) : -1);
  return gaps_between_pores(c.measured.pores, c.measured.geometry, reach_mm, c.control);
}

double smaller_diameter(const RequirementContext& c, std::int32_t id_a, std::int32_t id_b) {
  return std::min(pore_of(c, id_a).equivalent_diameter_mm, pore_of(c, id_b).equivalent_diameter_mm);
}

double gap_value(const RequirementContext& c, const PoreGap& gap) {
  return c.requirement.relative ? gap.gap_mm / smaller_diameter(c, gap.id_a, gap.id_b) : gap.gap_mm;
}

// The pair of least value with a pore in the zone, looked for up to a value; id 0: none.
PoreGap least_gap(const RequirementContext& c, double up_to) {
  const auto gaps = gaps_within(c, [&](const Pore& pore) {
    return c.requirement.relative ? up_to * pore.equivalent_diameter_mm : up_to;
  });
  PoreGap best;
  for (const PoreGap& gap : gaps) {
    if (!c.in_zone(pore_of(c, gap.id_a)) && !c.in_zone(pore_of(c, gap.id_b))) continue;
    if (best.id_a == 0 || gap_value(c, gap) < gap_value(c, best)) best = gap;
  }
  return best;
}

// A value that some counted pair keeps below, from the pores' nearest neighbours; 0: those tell of none.
double known_bound(const RequirementContext& c) {
  double bound = 0;
  for (const Pore* p : c.pores) {
    if (p->nearest_id == 0 || !is_counted(c, pore_of(c, p->nearest_id))) continue;
    const double value = gap_value(c, {p->id, p->nearest_id, p->spacing_mm});
    bound = bound > 0 ? std::min(bound, value) : std::max(value, 1e-9);
  }
  return bound;
}

// No gap of the volume has a larger value.
double farthest_gap(const RequirementContext& c) {
  const VolumeGeometry& g = c.measured.geometry;
  double squares = 0, smallest = 0;
  for (std::size_t a = 0; a < 3; ++a)
    squares += std::pow(static_cast<double>(g.size[a]) * g.spacing_mm[a], 2);
  for (const Pore& p : c.measured.pores.pores) {
    if (!is_counted(c, p)) continue;
    smallest = smallest > 0 ? std::min(smallest, p.equivalent_diameter_mm) : p.equivalent_diameter_mm;
  }
  return std::sqrt(squares) / (c.requirement.relative && smallest > 0 ? smallest : 1);
}

// Groups of pores linked by gaps below the smaller of the two linked pores' diameters, and what the largest
// one spans.
struct Nest {
  double extent_mm = 0;
  const Pore* largest = nullptr;  // of the two that span it
};

Nest largest_nest(const RequirementContext& c, const std::vector<PoreGap>& gaps, double gap_error_mm) {
  const std::size_t n = c.measured.pores.pores.size() + 1;
  std::vector<std::size_t> group(n);
  std::iota(group.begin(), group.end(), std::size_t{0});
  const auto root = [&](std::size_t i) {
    while (group[i] != i) i = group[i] = group[group[i]];
    return i;
  };
  for (const PoreGap& gap : gaps) {
    if (!c.in_zone(pore_of(c, gap.id_a)) || !c.in_zone(pore_of(c, gap.id_b))) continue;
    if (gap.gap_mm + gap_error_mm >= smaller_diameter(c, gap.id_a, gap.id_b)) continue;
    group[root(static_cast<std::size_t>(gap.id_a))] = root(static_cast<std::size_t>(gap.id_b));
  }
  std::vector<std::vector<const Pore*>> members(n);
  for (const Pore* p : c.pores) members[root(static_cast<std::size_t>(p->id))].push_back(p);
  Nest best;
  for (const auto& nest : members) {
    if (nest.size() < 2) continue;
    for (std::size_t i = 0; i < nest.size(); ++i) {
      for (std::size_t j = i; j < nest.size(); ++j) {
        const double extent =
            length(nest[j]->centre_mm - nest[i]->centre_mm) + 0.5 * (nest[i]->length_mm + nest[j]->length_mm);
        // Members are in the order of their size.
        if (extent > best.extent_mm) best = {extent, nest[i]};
      }
    }
  }
  return best;
}

}  // namespace

void measure_gap(RequirementContext& c) {
  const std::string alone = "no two pores lie in the part, one of them in the zone";
  const auto& all = c.measured.pores.pores;
  const auto counted = std::count_if(all.begin(), all.end(), [&](const Pore& p) { return is_counted(c, p); });
  if (c.pores.empty() || counted < 2) return c.none(alone, true);
  double up_to = known_bound(c);
  PoreGap best;
  if (up_to > 0) best = least_gap(c, up_to * (1 + 1e-9));
  // The nearest neighbours may be pores that do not count: look ever farther.
  const double farthest = farthest_gap(c);
  for (up_to = 4 * c.voxel_mm(); best.id_a == 0 && up_to < 2 * farthest; up_to *= 2)
    best = least_gap(c, up_to);
  if (best.id_a == 0) return c.none(alone, true);
  const double smaller = smaller_diameter(c, best.id_a, best.id_b);
  const double value = gap_value(c, best);
  std::vector<Contribution> parts{
      {"pore surfaces", caliper_voxels * c.voxel_mm() / (c.requirement.relative ? smaller : 1)}};
  const Pore &a = pore_of(c, best.id_a), &b = pore_of(c, best.id_b);
  if (c.requirement.relative) {
    const Pore& small = a.equivalent_diameter_mm < b.equivalent_diameter_mm ? a : b;
    parts.push_back({"diameter", value * small.diameter_standard_uncertainty_mm / smaller});
  }
  c.set(value, parts);
  c.point_at(c.in_zone(a) ? a : b, "gap beside pore");
  c.result.evidence.what =
      "gap between pores " + std::to_string(best.id_a) + " and " + std::to_string(best.id_b);
}

void measure_nest(RequirementContext& c) {
  const double gap_u = caliper_voxels * c.voxel_mm();
  const auto gaps = gaps_within(c, [&](const Pore& pore) { return pore.equivalent_diameter_mm + gap_u; });
  const Nest nest = largest_nest(c, gaps, 0);
  // Links near their limit hold or do not hold.
  const double wide = largest_nest(c, gaps, -gap_u).extent_mm, tight = largest_nest(c, gaps, gap_u).extent_mm;
  if (nest.largest == nullptr) {
    return c.none("no pores lie near enough to each other to form a nest", wide == 0);
  }
  c.set(nest.extent_mm,
        {{"calipers", caliper_voxels * c.voxel_mm()}, {"links near their limit", 0.5 * (wide - tight)}});
  c.result.evidence = {nest.largest->id, nest.largest->centre_mm, nest.extent_mm,
                       "nest around pore " + std::to_string(nest.largest->id)};
}

}  // namespace halfmark
