// Porosities: of the zone, of its open pores, of its worst section and of its worst reference body.
#include <algorithm>
#include <cmath>

#include "analysis/moving_porosity.h"
#include "analysis/requirement_context.h"

namespace halfmark {

namespace {

// The body moves by an eighth of its size at most: a pore may lie this share of its porosity better within.
constexpr double step_share = 0.02;

// So few pores say nothing of how many smaller ones there are: the reader is reminded of them.
constexpr std::int64_t few_pores = 10;

// How many pores are too small to be seen is unknown: no number for them is in the uncertainty.
void say_what_is_not_in_it(RequirementContext& c, std::int64_t pores) {
  const double smallest = c.measured.smallest_expected_diameter_mm;
  if (pores >= few_pores || !(smallest > 0)) return;
  c.result.warnings.push_back(sentence(
      "pores below about %.3g mm cannot be seen in this scan: they are neither in this figure nor in its "
      "uncertainty",
      smallest));
}

void moving(RequirementContext& c, const std::optional<WorstPlace>& worst, const std::string& nothing,
            const std::string& what) {
  if (!worst) return c.none(nothing, false);
  const MeasuredPart& m = c.measured;
  const ZoneSums sums = sum_place(m.pores.field, m.pores.pores.size(), m.part, c.zones, c.zone, *worst);
  const double scale = 100 / static_cast<double>(std::max<std::int64_t>(sums.part_voxels, 1));
  const auto total = c.total(sums, false);
  say_what_is_not_in_it(c, total.count);
  auto contributions = total.contributions;
  for (Contribution& p : contributions) p.standard_uncertainty *= scale;
  contributions.push_back({"steps of the moving body", step_share * worst->percent});
  c.set(worst->percent, contributions);
  c.result.evidence = {0, m.geometry.index_to_mm(worst->index), worst->extent_mm, what};
}

}  // namespace

void measure_porosity(RequirementContext& c, bool only_open) {
  const ZoneSums sums = c.zone_sums();
  auto t = c.total(sums, only_open);
  const double scale = 100 / static_cast<double>(sums.part_voxels);
  for (Contribution& p : t.contributions) p.standard_uncertainty *= scale;
  c.set(std::max(0.0, t.voxels * scale), t.contributions);
  if (!only_open) say_what_is_not_in_it(c, t.count);
  if (t.largest != nullptr) {
    c.point_at(*t.largest, only_open ? "open porosity, largest pore" : "porosity, largest pore");
  } else {
    c.result.evidence.what = only_open ? "open porosity, no open pore found" : "porosity, no pore found";
  }
}

void measure_section_porosity(RequirementContext& c) {
  const MeasuredPart& m = c.measured;
  std::optional<WorstPlace> worst;
  for (int axis = 0; axis < 3; ++axis) {
    if (c.requirement.axis && *c.requirement.axis != axis) continue;
    const auto place = worst_section(m.pores.field, c.counts, m.part, c.zones, c.zone, m.geometry, axis,
                                     c.requirement.window_mm);
    if (place && (!worst || place->percent > worst->percent)) worst = place;
  }
  std::string what = "section";
  if (worst) {
    const double at = m.geometry.index_to_mm(worst->index)[static_cast<std::size_t>(worst->axis)];
    what = std::string(c.requirement.window_mm ? "window in section " : "section ") + "xyz"[worst->axis] +
           sentence(" = %.4g mm", at);
  }
  moving(c, worst, "no window of that size lies in the zone with at least 80 % part", what);
}

void measure_local_porosity(RequirementContext& c) {
  const MeasuredPart& m = c.measured;
  const auto worst =
      worst_reference(m.pores.field, c.counts, m.part, c.zones, c.zone, m.geometry, *c.requirement.reference);
  moving(c, worst, "no reference body of that size lies in the zone with at least 80 % part",
         c.requirement.reference->sphere ? "reference sphere" : "reference cube");
}

PoreSummary summarise_pores(const MeasuredPart& m, const ZoneSet& zones) {
  (void)zones;
  PoreSummary out;
  double own = 0, open = 0, threshold = 0, edge = 0;
  for (const Pore& p : m.pores.pores) {
    if (p.left_out || !p.disposition.empty()) continue;
    out.inclusions += p.kind == PoreKind::inclusion;
    out.in_between += p.kind == PoreKind::in_between;
    if (!is_void(p)) continue;
    ++out.count;
    out.closed += p.kind == PoreKind::closed;
    out.open += p.open;
    out.cut_by_field += p.cut_by_field;
    out.diffuse += p.kind == PoreKind::diffuse;
    out.volume_mm3.value += p.volume_mm3.value;
    if (p.open) open += p.volume_mm3.value;
    // Noise and local level are each pore's own; threshold and edge position err alike in all pores.
    for (const Contribution& c : p.volume_mm3.contributions) {
      const double u = c.standard_uncertainty;
      if (c.name == "noise" || c.name == "digitisation" || c.name == "mouth" || c.name == "local level") {
        own += u * u;
      } else {
        (c.name == "threshold" ? threshold : edge) += u;
      }
    }
  }
  out.volume_mm3.standard_uncertainty = std::sqrt(own + threshold * threshold + edge * edge);
  const double part_mm3 = static_cast<double>(m.part.inside.voxel_count()) * m.geometry.voxel_volume_mm3();
  out.porosity_percent.value = 100 * out.volume_mm3.value / part_mm3;
  out.porosity_percent.standard_uncertainty = 100 * out.volume_mm3.standard_uncertainty / part_mm3;
  out.open_porosity_percent = 100 * open / part_mm3;
  return out;
}

}  // namespace halfmark
