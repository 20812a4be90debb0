#include "analysis/requirement_context.h"

#include <algorithm>
#include <cmath>
#include <cstdio>

namespace halfmark {

bool is_void(const Pore& pore) {
  return pore.kind != PoreKind::inclusion && pore.kind != PoreKind::in_between;
}

bool counts_to_sizes(const Pore& pore, bool inclusions) {
  return inclusions ? pore.kind == PoreKind::inclusion : is_void(pore) && pore.kind != PoreKind::diffuse;
}

RequirementContext::RequirementContext(const Requirement& r, const InspectionSpec& s, const ZoneSet& z,
                                       const MeasuredPart& m, const RunControl& run)
    : requirement(r), spec(s), zones(z), measured(m), control(run), zone(z.index_of(r.zone)) {
  result.requirement = r;
  result.unit = unit_of(r.quantity, r.relative);
  const bool inclusions =
      r.quantity == Quantity::inclusion_diameter || r.quantity == Quantity::inclusion_count;
  counts.assign(m.pores.pores.size() + 1, 0);
  near_size_limit = counts;
  for (const Pore& p : m.pores.pores) {
    if (p.left_out || !p.disposition.empty()) continue;
    if (r.ignore_below_mm)
      near_size_limit[static_cast<std::size_t>(p.id)] =
          std::abs(p.equivalent_diameter_mm - *r.ignore_below_mm) < 2 * p.diameter_standard_uncertainty_mm;
    if (r.ignore_below_mm && p.equivalent_diameter_mm < *r.ignore_below_mm) continue;
    if (is_void(p) && !inclusions) counts[static_cast<std::size_t>(p.id)] = 1;
    if (counts_to_sizes(p, inclusions) && in_zone(p)) pores.push_back(&p);
  }
}

bool RequirementContext::any_cut() const {
  return std::any_of(pores.begin(), pores.end(), [](const Pore* p) { return p->cut_by_field; });
}

bool RequirementContext::in_zone(const Pore& pore) const {
  return std::find(pore.zones.begin(), pore.zones.end(), requirement.zone) != pore.zones.end();
}

bool RequirementContext::whole_part() const {
  if (zones.spec(zone).shape != ZoneShape::everything) return false;
  for (std::size_t i = 0; i < zones.count(); ++i) {
    if (zones.spec(i).use != ZoneUse::inspect) return false;
  }
  return true;
}

void RequirementContext::set(double value, std::vector<Contribution> contributions) {
  result.has_value = true;
  result.measured.value = value;
  double sum = 0;
  for (const Contribution& c : contributions) sum += c.standard_uncertainty * c.standard_uncertainty;
  result.measured.standard_uncertainty = std::sqrt(sum);
  result.measured.contributions = std::move(contributions);
}

void RequirementContext::point_at(const Pore& p, const std::string& what) {
  result.evidence = {p.id, p.centre_mm, std::max(p.length_mm, p.equivalent_diameter_mm),
                     what + " " + std::to_string(p.id)};
}

void RequirementContext::none(const std::string& reason, bool met) {
  result.reason = reason;
  result.met_without_value = met;
}

ZoneSums RequirementContext::zone_sums() const {
  return sum_zone(measured.pores.field, measured.pores.pores.size(), measured.part, zones, zone);
}

RequirementContext::Total RequirementContext::total(const ZoneSums& sums, bool only_open) const {
  Total out;
  double noise = 0, level = 0, threshold = 0, edge = 0, mouth = 0, near = 0, most = 0;
  const double voxel = measured.geometry.voxel_volume_mm3();
  for (const Pore& p : measured.pores.pores) {
    const auto id = static_cast<std::size_t>(p.id);
    const double share = static_cast<double>(sums.pore[id]) / PoreField::unit;
    if (share == 0 || !is_void(p) || (only_open && !p.open)) continue;
    // Half of it: the expanded uncertainty takes in the pore as counted and as not counted.
    if (near_size_limit[id] != 0) near += 0.5 * share;
    if (counts[id] == 0) continue;
    out.voxels += share;
    ++out.count;
    if (share > most) {
      most = share;
      out.largest = &p;
    }
    const double part = std::clamp(share * voxel / std::max(p.volume_mm3.value, 1e-300), 0.0, 1.0);
    for (const Contribution& c : p.volume_mm3.contributions) {
      const double u = part * c.standard_uncertainty / voxel;
      if (c.name == "noise" || c.name == "digitisation") {
        noise += u * u;
      } else if (c.name == "mouth") {
        mouth += u * u;
      } else if (c.name == "local level") {
        level += u * u;  // largely each ring's own noise
      } else if (c.name == "threshold") {
        threshold += u;
      } else {
        edge += u;
      }
    }
  }
  out.contributions = {{"noise", std::sqrt(noise)},
                       {"local level", std::sqrt(level)},
                       {"threshold", threshold},
                       {"edge position", edge}};
  if (mouth > 0) out.contributions.push_back({"mouth", std::sqrt(mouth)});
  if (requirement.ignore_below_mm) out.contributions.push_back({"pores near the size limit", near});
  return out;
}

}  // namespace halfmark
