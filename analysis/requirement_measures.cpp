#include "analysis/requirement_measures.h"

#include <algorithm>

#include "analysis/requirement_context.h"

namespace halfmark {

namespace {

void measure(RequirementContext& c) {
  switch (c.requirement.quantity) {
    case Quantity::porosity:
      return measure_porosity(c, false);
    case Quantity::open_porosity:
      return measure_porosity(c, true);
    case Quantity::section_porosity:
      return measure_section_porosity(c);
    case Quantity::local_porosity:
      return measure_local_porosity(c);
    case Quantity::pore_count:
    case Quantity::inclusion_count:
      return measure_count(c);
    case Quantity::pore_density:
      return measure_density(c);
    case Quantity::pore_diameter:
    case Quantity::inclusion_diameter:
      return measure_diameter(c);
    case Quantity::pore_length:
      return measure_length(c);
    case Quantity::pore_spacing:
      return measure_gap(c);
    case Quantity::pore_nest:
      return measure_nest(c);
    case Quantity::pore_depth:
      return measure_least_depth(c);
    case Quantity::wall_thickness:
      return measure_wall(c);
    case Quantity::material_volume:
      return measure_material_volume(c);
    case Quantity::surface_area:
      return measure_surface_area(c);
  }
}

void warn(RequirementContext& c) {
  const double smallest = c.measured.smallest_expected_diameter_mm;
  double limit = 0;
  if (c.requirement.quantity == Quantity::pore_diameter || c.requirement.quantity == Quantity::pore_length)
    limit = c.requirement.max.value_or(0);
  if (c.requirement.quantity == Quantity::pore_count || c.requirement.quantity == Quantity::pore_density ||
      c.requirement.quantity == Quantity::pore_spacing || c.requirement.quantity == Quantity::pore_depth) {
    limit = c.requirement.ignore_below_mm.value_or(0);
    if (!c.requirement.ignore_below_mm && smallest > 0) {
      c.result.warnings.push_back(sentence(
          "without ignore_below_mm every pore counts, but pores below about %.3g mm cannot be seen in "
          "this scan",
          smallest));
    }
  }
  if (limit > 0 && smallest > limit) {
    c.result.beyond_the_scan = true;
    c.result.warnings.push_back(
        sentence("the limit of %.3g mm lies below what blur and noise let this scan show (about %.3g mm, an "
                 "estimate): the requirement cannot be proved by it",
                 limit, smallest));
  }
  if (c.any_cut() && c.requirement.quantity != Quantity::wall_thickness &&
      c.requirement.quantity != Quantity::material_volume &&
      c.requirement.quantity != Quantity::surface_area) {
    c.result.warnings.emplace_back("pores are cut by the field of view: their sizes are lower bounds");
  }
  const bool powder =
      std::any_of(c.measured.pores.pores.begin(), c.measured.pores.pores.end(),
                  [](const Pore& p) { return p.kind == PoreKind::in_between && !p.left_out; });
  if (powder &&
      (c.requirement.quantity == Quantity::porosity || c.requirement.quantity == Quantity::pore_diameter ||
       c.requirement.quantity == Quantity::pore_count)) {
    c.result.warnings.emplace_back(
        "regions of in-between grey (trapped powder, core sand) were found; they are listed but do not "
        "count as pores");
  }
}

}  // namespace

void assign_zones(std::vector<Pore>& pores, const ZoneSet& zones) {
  for (Pore& pore : pores) {
    pore.zones.clear();
    pore.left_out = zones.left_out(pore.centre_mm);
    for (std::size_t i = 0; i < zones.count(); ++i) {
      if (zones.spec(i).use == ZoneUse::inspect && zones.contains(i, pore.centre_mm))
        pore.zones.push_back(zones.spec(i).id);
    }
  }
}

RequirementResult measure_requirement(const Requirement& requirement, const InspectionSpec& spec,
                                      const ZoneSet& zones, const MeasuredPart& measured,
                                      const RunControl& control) {
  control.throw_if_cancelled();
  RequirementContext c(requirement, spec, zones, measured, control);
  if (c.whole_part() || c.zone_sums().part_voxels > 0) {
    measure(c);
  } else {
    c.none("the zone holds no part: check its place, and what is excluded from it", false);
  }
  warn(c);
  return c.result;
}

}  // namespace halfmark
