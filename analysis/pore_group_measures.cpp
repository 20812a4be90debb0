// Pores by their neighbours: the least gap between two, and nests.
#include <algorithm>
#include <cmath>
#include <numeric>

#include "analysis/requirement_context.h"

namespace halfmark {

void measure_gap(RequirementContext& c) {
  const Pore* best = nullptr;
  double least = 0, smaller = 1;
  for (const Pore* p : c.pores) {
    if (std::isnan(p->spacing_mm) || p->nearest_id == 0) continue;
    const Pore& other = c.measured.pores.pores[static_cast<std::size_t>(p->nearest_id - 1)];
    if (other.left_out || !other.disposition.empty() ||
        (c.requirement.ignore_below_mm && other.equivalent_diameter_mm < *c.requirement.ignore_below_mm))
      continue;
    const double diameter = std::min(p->equivalent_diameter_mm, other.equivalent_diameter_mm);
    const double value = c.requirement.relative ? p->spacing_mm / diameter : p->spacing_mm;
    if (best == nullptr || value < least) {
      best = p;
      least = value;
      smaller = diameter;
    }
  }
  if (best == nullptr) return c.none("no two pores lie near each other in the zone", true);
  const double u = caliper_voxels * c.voxel_mm() / (c.requirement.relative ? smaller : 1);
  c.set(least, {{"pore surfaces", u}});
  c.point_at(*best, "gap beside pore");
}

void measure_nest(RequirementContext& c) {
  // Linked by gaps smaller than the smaller of the two; gaps between equivalent spheres.
  auto pores = c.pores;
  std::sort(pores.begin(), pores.end(), [](const Pore* a, const Pore* b) {
    return a->centre_mm[0] != b->centre_mm[0] ? a->centre_mm[0] < b->centre_mm[0] : a->id < b->id;
  });
  std::vector<std::size_t> group(pores.size());
  std::iota(group.begin(), group.end(), std::size_t{0});
  const auto root = [&](std::size_t i) {
    while (group[i] != i) i = group[i] = group[group[i]];
    return i;
  };
  double largest = 0;
  for (const Pore* p : pores) largest = std::max(largest, p->equivalent_diameter_mm);
  for (std::size_t i = 0; i < pores.size(); ++i) {
    for (std::size_t j = i + 1;
         j < pores.size() && pores[j]->centre_mm[0] - pores[i]->centre_mm[0] < 2 * largest; ++j) {
      const double a = pores[i]->equivalent_diameter_mm, b = pores[j]->equivalent_diameter_mm;
      if (length(pores[j]->centre_mm - pores[i]->centre_mm) - 0.5 * (a + b) < std::min(a, b))
        group[root(i)] = root(j);
    }
  }
  double extent = 0;
  const Pore* at = nullptr;
  for (std::size_t i = 0; i < pores.size(); ++i) {
    for (std::size_t j = i + 1; j < pores.size(); ++j) {
      if (root(i) != root(j)) continue;
      const double e = length(pores[j]->centre_mm - pores[i]->centre_mm) +
                       0.5 * (pores[i]->length_mm + pores[j]->length_mm);
      if (e > extent) {
        extent = e;
        at = pores[i]->equivalent_diameter_mm > pores[j]->equivalent_diameter_mm ? pores[i] : pores[j];
      }
    }
  }
  if (at == nullptr) return c.none("no pores lie near enough to each other to form a nest", true);
  c.set(extent, {{"calipers", caliper_voxels * c.voxel_mm()}});
  c.result.evidence = {at->id, at->centre_mm, extent, "nest around pore " + std::to_string(at->id)};
}

}  // namespace halfmark
