#include "reports/requirement_text.h"

#include <algorithm>
#include <cmath>
#include <limits>

#include "analysis/number_text.h"

namespace halfmark {

namespace {

std::string with_unit(const std::string& number, const std::string& unit) {
  return unit.empty() ? number : number + " " + unit;
}

const char* axis_name(int axis) { return axis == 0 ? "x" : axis == 1 ? "y" : "z"; }

std::string section_words(const Requirement& r) {
  std::string words = "largest porosity of a section";
  if (r.axis) words += std::string(" across ") + axis_name(*r.axis);
  if (r.window_mm) words += " in a window of " + number_text(*r.window_mm) + " mm";
  return words;
}

std::string local_words(const Requirement& r) {
  if (!r.reference) return "largest local porosity";
  return std::string("largest porosity in a moving ") + (r.reference->sphere ? "sphere" : "cube") + " of " +
         number_text(r.reference->size_mm) + " mm";
}

}  // namespace

std::string quantity_words(const Requirement& r) {
  switch (r.quantity) {
    case Quantity::porosity:
      return "porosity";
    case Quantity::section_porosity:
      return section_words(r);
    case Quantity::local_porosity:
      return local_words(r);
    case Quantity::pore_count:
      return "number of pores";
    case Quantity::pore_density:
      return "pores per volume";
    case Quantity::pore_diameter:
      return "largest pore diameter";
    case Quantity::pore_length:
      return "largest pore length";
    case Quantity::pore_spacing:
      return r.relative ? "smallest gap between pores, in diameters of the smaller"
                        : "smallest gap between pores";
    case Quantity::pore_nest:
      return "extent of the largest nest of pores";
    case Quantity::pore_depth:
      return "least material over a pore";
    case Quantity::open_porosity:
      return "open porosity";
    case Quantity::inclusion_diameter:
      return "largest inclusion diameter";
    case Quantity::inclusion_count:
      return "number of inclusions";
    case Quantity::wall_thickness:
      return r.percentile ? "wall thickness, " + number_text(*r.percentile) + " % percentile"
                          : "least wall thickness";
    case Quantity::material_volume:
      return "material volume";
    case Quantity::surface_area:
      return "surface area";
  }
  return to_text(r.quantity);
}

std::string requirement_words(const Requirement& r) {
  std::string words = quantity_words(r);
  if (!r.zone.empty()) words += " in " + one_line(r.zone);
  if (r.ignore_below_mm) words += ", pores below " + number_text(*r.ignore_below_mm) + " mm ignored";
  return words;
}

std::string limit_words(const RequirementResult& result) {
  const Requirement& r = result.requirement;
  if (r.min && r.max) return with_unit(number_text(*r.min, 6) + " to " + number_text(*r.max, 6), result.unit);
  if (r.max) return "at most " + with_unit(number_text(*r.max, 6), result.unit);
  if (r.min) return "at least " + with_unit(number_text(*r.min, 6), result.unit);
  return "no limit";
}

std::string value_words(const RequirementResult& result) {
  if (!result.has_value) return result.met_without_value ? "none found" : "not measured";
  return measured_text(result.measured.value, result.expanded_uncertainty, result.unit);
}

double margin(const RequirementResult& result) {
  double least = std::numeric_limits<double>::infinity();
  if (!result.has_value) return not_measured;
  if (result.requirement.max) least = std::min(least, *result.requirement.max - result.measured.value);
  if (result.requirement.min) least = std::min(least, result.measured.value - *result.requirement.min);
  return std::isfinite(least) ? least : not_measured;
}

std::string margin_words(const RequirementResult& result) {
  const double m = margin(result);
  if (!std::isfinite(m)) return "–";
  const std::string number = rounded(m, result.expanded_uncertainty).value;
  const bool positive = number.find_first_not_of("-0.") != std::string::npos && m > 0;
  std::string words = positive ? "+" + number : number;
  if (words.front() == '-') words.replace(0, 1, "−");
  return with_unit(words, result.unit);
}

std::string pore_words(const Inspection& inspection) {
  const PoreSummary& s = inspection.pore_summary;
  std::vector<std::string> kinds;
  const auto add = [&](std::int64_t n, const char* words) {
    if (n > 0) kinds.push_back(std::to_string(n) + " " + words);
  };
  add(s.closed, "closed");
  add(s.open, "open");
  add(s.cut_by_field, "cut by the field of view");
  add(s.diffuse, "diffuse");
  std::string words = counted(s.count, "pore", "pores");
  if (!kinds.empty()) words += ": " + joined(kinds, ", ");
  if (s.in_between > 0) words += "; " + counted(s.in_between, "region", "regions") + " of in-between grey";
  if (s.inclusions > 0) words += "; " + counted(s.inclusions, "inclusion", "inclusions");
  words += "; porosity " + measured_text(s.porosity_percent.value,
                                         inspection.spec.decision.coverage_factor.value_or(2) *
                                             s.porosity_percent.standard_uncertainty,
                                         "%");
  return words;
}

std::vector<std::string> all_warnings(const Inspection& inspection) {
  std::vector<std::string> all;
  const auto add = [&](const std::string& warning) {
    if (std::find(all.begin(), all.end(), warning) == all.end()) all.push_back(warning);
  };
  for (const std::string& w : inspection.grey_levels.warnings) add(one_line(w));
  for (const RequirementResult& r : inspection.requirements)
    for (const std::string& w : r.warnings) add(one_line(r.requirement.id + ": " + w));
  for (const std::string& w : inspection.warnings) add(one_line(w));
  return all;
}

std::string part_words(const Inspection& inspection) {
  const PartText& part = inspection.spec.part;
  std::vector<std::string> words;
  if (!part.name.empty()) words.push_back(one_line(part.name));
  if (!part.drawing.empty()) words.push_back("drawing " + one_line(part.drawing));
  if (!part.revision.empty()) words.push_back("revision " + one_line(part.revision));
  return words.empty() ? one_line(inspection.spec.title) : joined(words, ", ");
}

}  // namespace halfmark
