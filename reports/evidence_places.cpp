#include "reports/evidence_places.h"

#include <algorithm>

namespace halfmark {

namespace {

int severity(Verdict v) { return v == Verdict::reject ? 0 : v == Verdict::undecided ? 1 : 2; }

int section_axis_of(const RequirementResult& r) {
  if (r.requirement.quantity != Quantity::section_porosity) return -1;
  if (r.requirement.axis) return *r.requirement.axis;
  for (int axis = 0; axis < 3; ++axis)  // the worst of the three axes is told in words: "section z = 12.3 mm"
    if (r.evidence.what.find(std::string("section ") + "xyz"[axis]) != std::string::npos) return axis;
  return 2;
}

bool same_place(const EvidencePlace& a, const EvidencePlace& b) {
  if (a.section_axis != b.section_axis || a.wall != b.wall) return false;
  if (a.evidence.pore_id > 0 && a.evidence.pore_id == b.evidence.pore_id) return true;
  return a.evidence.pore_id == b.evidence.pore_id && a.evidence.position_mm == b.evidence.position_mm;
}

std::string letters(std::size_t i) {
  std::string text(1, static_cast<char>('A' + i % 26));
  return i < 26 ? text : letters(i / 26 - 1) + text;
}

}  // namespace

std::vector<EvidencePlace> evidence_places(const Inspection& inspection) {
  std::vector<std::size_t> order(inspection.requirements.size());
  for (std::size_t i = 0; i < order.size(); ++i) order[i] = i;
  std::stable_sort(order.begin(), order.end(), [&](std::size_t a, std::size_t b) {
    return severity(inspection.requirements[a].verdict) < severity(inspection.requirements[b].verdict);
  });
  std::vector<EvidencePlace> places;
  for (const std::size_t i : order) {
    const RequirementResult& r = inspection.requirements[i];
    if (!r.evidence.position_mm) continue;
    EvidencePlace place;
    place.verdict = r.verdict;
    place.requirements = {i};
    place.evidence = r.evidence;
    place.section_axis = section_axis_of(r);
    place.wall = r.requirement.quantity == Quantity::wall_thickness;
    place.wall_mm = place.wall && r.has_value ? r.measured.value : 0;
    const auto known =
        std::find_if(places.begin(), places.end(), [&](const auto& p) { return same_place(p, place); });
    if (known == places.end())
      places.push_back(place);
    else
      known->requirements.push_back(i);
  }
  for (std::size_t i = 0; i < places.size(); ++i) places[i].letter = letters(i);
  return places;
}

std::string letter_of(const std::vector<EvidencePlace>& places, std::size_t requirement) {
  for (const EvidencePlace& place : places)
    if (std::find(place.requirements.begin(), place.requirements.end(), requirement) !=
        place.requirements.end())
      return place.letter;
  return "";
}

}  // namespace halfmark
