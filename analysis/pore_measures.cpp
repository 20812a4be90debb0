// Pores one by one: their number, the largest, the longest, the one nearest to the surface.
#include <algorithm>
#include <cmath>

#include "analysis/requirement_context.h"

namespace halfmark {

namespace {

// Pores within their own uncertainty of the size limit may or may not count: the expanded uncertainty (k = 2)
// is their number.
double count_uncertainty(const RequirementContext& c) {
  const bool inclusions = c.requirement.quantity == Quantity::inclusion_count;
  double near = 0;
  for (const Pore& p : c.measured.pores.pores)
    near += c.near_size_limit[static_cast<std::size_t>(p.id)] != 0 && counts_to_sizes(p, inclusions) &&
            c.in_zone(p);
  return 0.5 * near;
}

bool searched_for_inclusions(const RequirementContext& c) {
  return c.spec.pores.inclusions && c.spec.pores.method == PoreMethod::local;
}

void count(RequirementContext& c, double per) {
  if (c.requirement.quantity == Quantity::inclusion_count && !searched_for_inclusions(c))
    return c.none("inclusions are not searched for by pores.method iso50", false);
  c.set(static_cast<double>(c.pores.size()) / per,
        {{"pores near the size limit", count_uncertainty(c) / per}});
  c.result.evidence.what =
      c.requirement.quantity == Quantity::inclusion_count ? "inclusions counted" : "pores counted";
  if (!c.pores.empty()) c.point_at(*c.pores.front(), "count, largest: number");
}

template <class Value>
const Pore* extreme(const RequirementContext& c, Value&& value, bool largest) {
  const Pore* best = nullptr;
  for (const Pore* p : c.pores) {
    if (std::isnan(value(*p))) continue;
    if (best == nullptr || (largest ? value(*p) > value(*best) : value(*p) < value(*best))) best = p;
  }
  return best;
}

}  // namespace

void measure_count(RequirementContext& c) { count(c, 1); }

void measure_density(RequirementContext& c) {
  const ZoneSums sums = c.zone_sums();
  count(c, static_cast<double>(sums.part_voxels) * c.measured.geometry.voxel_volume_mm3() / 1000);
}

void measure_diameter(RequirementContext& c) {
  const bool inclusions = c.requirement.quantity == Quantity::inclusion_diameter;
  const Pore* p = extreme(
      c, [](const Pore& q) { return q.equivalent_diameter_mm; }, true);
  if (p == nullptr)
    return c.none(!inclusions                  ? "no pore was found in the zone"
                  : searched_for_inclusions(c) ? "no inclusion was found in the zone"
                                               : "inclusions are not searched for by pores.method iso50",
                  !inclusions || searched_for_inclusions(c));
  c.set(p->equivalent_diameter_mm, {{"volume", p->diameter_standard_uncertainty_mm}});
  c.result.lower_bound = c.any_cut();
  c.point_at(*p, inclusions ? "inclusion" : "pore");
}

void measure_length(RequirementContext& c) {
  const Pore* p = extreme(
      c, [](const Pore& q) { return q.length_mm; }, true);
  if (p == nullptr) return c.none("no pore was found in the zone", true);
  c.set(p->length_mm, {{"volume", p->length_mm * p->diameter_standard_uncertainty_mm /
                                      std::max(p->equivalent_diameter_mm, 1e-300)},
                       {"calipers", caliper_voxels * c.voxel_mm()}});
  c.result.lower_bound = c.any_cut();
  c.point_at(*p, "pore");
}

void measure_least_depth(RequirementContext& c) {
  const Pore* p = extreme(
      c, [](const Pore& q) { return q.kind == PoreKind::closed ? q.depth_mm : not_measured; }, false);
  const bool outside = c.measured.part.has_outside;
  if (p == nullptr)
    return c.none(outside ? "no closed pore was found in the zone"
                          : "the part fills the field: it has no surface to measure a depth from",
                  outside);
  c.set(p->depth_mm, {{"pore and part surface", caliper_voxels * c.voxel_mm()}});
  c.point_at(*p, "pore");
}

}  // namespace halfmark
