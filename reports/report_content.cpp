#include "reports/report_content.h"

#include <algorithm>
#include <cmath>

#include "analysis/number_text.h"
#include "reports/program_text.h"
#include "reports/report_method.h"
#include "reports/requirement_text.h"

namespace halfmark {

namespace {

constexpr std::size_t most_listed_pores = 20, most_listed_spots = 10;

Cell text_cell(std::string text, std::string note = "") {
  return {std::move(text), std::move(note), {}, false};
}
Cell number_cell(std::string text) { return {std::move(text), "", {}, true}; }
Cell verdict_cell(Verdict verdict) { return {to_text(verdict), "", verdict, false}; }

std::string verdict_sentence(const Inspection& in) {
  std::vector<std::string> broken, open;
  for (const RequirementResult& r : in.requirements) {
    if (r.verdict == Verdict::reject) broken.push_back(one_line(r.requirement.id));
    if (r.verdict == Verdict::undecided) open.push_back(one_line(r.requirement.id));
  }
  if (in.requirements.empty()) return "No requirement was checked.";
  if (broken.empty() && open.empty()) return "Every requirement is shown to be met.";
  std::vector<std::string> parts;
  if (!broken.empty()) parts.push_back("Not met: " + joined(broken, ", ") + ".");
  if (!open.empty()) parts.push_back("Not decided by this scan: " + joined(open, ", ") + ".");
  return joined(parts, " ");
}

Section part_section(const Inspection& in, const std::string& date) {
  FactsBlock facts{{}, true};
  const auto add = [&](const char* name, const std::string& value) {
    if (!value.empty()) facts.facts.emplace_back(name, one_line(value));
  };
  const PartText& part = in.spec.part;
  add("Part", part.name);
  add("Serial number", in.serial.empty() ? "not given" : in.serial);
  add("Drawing", part.revision.empty() ? part.drawing : part.drawing + ", revision " + part.revision);
  add("Material", part.material);
  add("Customer order", part.customer_order);
  add("Volume", file_name_of(in.volume.file));
  add("Spec", file_name_of(in.spec.file.string()));
  add("Written", date);
  return {"Part", {facts}};
}

Section requirement_section(const Inspection& in, const std::vector<EvidencePlace>& places) {
  TableBlock table;
  table.header = {
      text_cell("No."),      text_cell("Requirement"), number_cell("Limit"), number_cell("Measured ± U"),
      number_cell("Margin"), text_cell("Place"),       text_cell("Verdict")};
  table.shares = {0.05, 0.255, 0.15, 0.205, 0.135, 0.065, 0.14};
  double factor = 2;
  for (std::size_t i = 0; i < in.requirements.size(); ++i) {
    const RequirementResult& r = in.requirements[i];
    factor = r.coverage_factor;
    table.rows.push_back(
        {text_cell(one_line(r.requirement.id)), text_cell(capitalised(requirement_words(r.requirement))),
         number_cell(limit_words(r)), number_cell(value_words(r)), number_cell(margin_words(r)),
         text_cell(letter_of(places, i)), verdict_cell(r.verdict)});
    table.notes.push_back(one_line(r.reason));
  }
  Section section{"Requirements", {table}};
  section.blocks.push_back(
      TextBlock{"U is the expanded uncertainty (coverage factor " + number_text(factor, 3) +
                "). The margin is the distance from the limit, positive on the good side. " +
                (in.spec.decision.rule == DecisionRule::guarded
                     ? "Decision by guarded acceptance (ISO 14253-1, JCGM 106): accept only where the value "
                       "keeps the limit by U, "
                       "reject only where it breaks it by U."
                     : "Decision by simple acceptance: the value alone is compared with the limit.")});
  return section;
}

std::string place_heading(const Inspection& in, const EvidencePlace& place) {
  std::vector<std::string> ids;
  for (const std::size_t i : place.requirements) ids.push_back(one_line(in.requirements[i].requirement.id));
  std::string words = place.letter + ": " + joined(ids, ", ");
  if (!place.evidence.what.empty()) words += ", " + one_line(place.evidence.what);
  return words;
}

std::string pore_facts(const Inspection& in, std::int32_t id) {
  for (const Pore& p : in.pores) {
    if (p.id != id) continue;
    std::string words = "Pore " + std::to_string(id) + ": " + to_text(p.kind);
    if (p.shape != ShapeClass::unclassified) words += std::string(", ") + to_text(p.shape);
    words += "; diameter " +
             measured_text(p.equivalent_diameter_mm, 2 * p.diameter_standard_uncertainty_mm, "mm") +
             " (k = 2), length " + number_text(p.length_mm, 3) + " mm";
    if (std::isfinite(p.depth_mm) && !p.open)
      words += ", " + number_text(p.depth_mm, 3) + " mm below the surface";
    if (std::isfinite(p.spacing_mm))
      words += ", " + number_text(p.spacing_mm, 3) + " mm from pore " + std::to_string(p.nearest_id);
    return words + ".";
  }
  return "";
}

Section place_section(const Inspection& in, const ReportFigures& figures) {
  Section section{"Deciding places", {}};
  if (!figures.part.picture.empty()) section.blocks.push_back(FigureBlock{{figures.part}, {0.8}});
  if (figures.places.empty()) {
    section.blocks.push_back(TextBlock{"No requirement is decided by a single place."});
    return section;
  }
  section.blocks.push_back(TextBlock{
      "Pores carry the colour of their own verdict: blue accept, yellow undecided, vermilion reject. In the "
      "slices the "
      "thin green line is the ISO-50 surface, the corners frame the deciding place, and the outline of the "
      "deciding "
      "pore is the thicker one. Grey values are shown from a little below air to a little above material."});
  for (std::size_t i = 0; i < figures.slices.size(); ++i) {
    const EvidencePlace& place = figures.places[i];
    section.blocks.push_back(SubheadingBlock{place_heading(in, place), place.verdict});
    std::string words;
    for (const std::size_t r : place.requirements)
      words += capitalised(requirement_words(in.requirements[r].requirement)) + ": " +
               value_words(in.requirements[r]) + ", " + limit_words(in.requirements[r]) + ". ";
    words +=
        "At " + position_text(place.evidence.position_mm->data(), in.volume.geometry.voxel_mm()) + " mm. ";
    words += pore_facts(in, place.evidence.pore_id);
    section.blocks.push_back(TextBlock{words});
    FigureBlock pictures{{figures.slices[i].detail}, {0.6}};
    if (!figures.slices[i].overview.picture.empty()) {
      pictures.figures.push_back(figures.slices[i].overview);
      pictures.shares.push_back(0.4);
    }
    section.blocks.push_back(pictures);
  }
  if (figures.places.size() > figures.slices.size())
    section.blocks.push_back(
        TextBlock{"Further deciding places are listed in the requirement table and in result.json; "
                  "pictures are shown of the first " +
                  std::to_string(figures.slices.size()) + "."});
  return section;
}

std::vector<const Pore*> largest_pores(const Inspection& in) {
  std::vector<const Pore*> order;
  for (const Pore& pore : in.pores) order.push_back(&pore);
  std::stable_sort(order.begin(), order.end(),
                   [](const Pore* a, const Pore* b) { return a->volume_mm3.value > b->volume_mm3.value; });
  if (order.size() > most_listed_pores) order.resize(most_listed_pores);
  return order;
}

TableBlock pore_table(const Inspection& in) {
  TableBlock table;
  table.header = {number_cell("Pore"),       text_cell("Kind"),          text_cell("Shape"),
                  number_cell("x, y, z mm"), number_cell("Diameter mm"), number_cell("Length mm"),
                  number_cell("Volume mm³"), number_cell("Depth mm"),    text_cell("Verdict")};
  table.shares = {0.06, 0.12, 0.1, 0.18, 0.155, 0.08, 0.1, 0.07, 0.135};
  for (const Pore* p : largest_pores(in)) {
    std::string kind = to_text(p->kind);
    std::replace(kind.begin(), kind.end(), '_', ' ');
    table.rows.push_back(
        {number_cell(std::to_string(p->id)), text_cell(kind, one_line(p->disposition)),
         text_cell(to_text(p->shape)),
         number_cell(position_text(p->centre_mm.data(), in.volume.geometry.voxel_mm())),
         number_cell(measured_text(p->equivalent_diameter_mm, 2 * p->diameter_standard_uncertainty_mm, "")),
         number_cell(number_text(p->length_mm, 3)), number_cell(number_text(p->volume_mm3.value, 4)),
         number_cell(number_text(p->depth_mm, 3)), verdict_cell(p->verdict)});
  }
  return table;
}

Section pore_section(const Inspection& in, const ReportFigures& figures) {
  Section section{"Pores", {}};
  const PoreSummary& s = in.pore_summary;
  std::string words = capitalised(pore_words(in)) + ". Relative density " +
                      number_text(100 - s.porosity_percent.value, 5) + " %; pore volume " +
                      measured_text(s.volume_mm3.value, 2 * s.volume_mm3.standard_uncertainty, "mm³") +
                      " (k = 2).";
  if (s.smallest_expected_diameter_mm > 0)
    words += " The smallest pore this scan is expected to show is about " +
             number_text(s.smallest_expected_diameter_mm, 2) + " mm across.";
  section.blocks.push_back(TextBlock{words});
  if (!figures.pore_sizes.picture.empty()) section.blocks.push_back(FigureBlock{{figures.pore_sizes}, {0.8}});
  if (in.pores.empty()) return section;
  section.blocks.push_back(SubheadingBlock{
      in.pores.size() > most_listed_pores
          ? "The " + std::to_string(most_listed_pores) + " largest of " + std::to_string(in.pores.size())
          : "All pores",
      {}});
  section.blocks.push_back(pore_table(in));
  section.blocks.push_back(
      TextBlock{"Diameter: of the sphere of equal volume, ± U (k = 2). Depth: least material to the "
                "part's surface. The whole list is in pores.csv."});
  return section;
}

Section wall_section(const Inspection& in, const ReportFigures& figures) {
  const WallSummary& walls = *in.walls;
  Section section{"Walls", {}};
  if (!walls.any_wall) {
    section.blocks.push_back(TextBlock{"No place has two sides within reach of the measurement."});
    return section;
  }
  std::vector<std::string> shares;
  for (const auto& [percent, mm] : walls.percentiles)
    shares.push_back(number_text(percent) + " %: " + number_text(mm, 4) + " mm");
  section.blocks.push_back(TextBlock{
      "Least wall " + measured_text(walls.least_mm.value, 2 * walls.least_mm.standard_uncertainty, "mm") +
      " (k = 2), as the mean over a patch; mean " + number_text(walls.mean_mm) +
      " mm. Share of the wall area thinner than: " + joined(shares, "; ") + "."});
  if (!figures.walls.picture.empty()) section.blocks.push_back(FigureBlock{{figures.walls}, {1}});
  if (walls.spots.empty()) return section;
  TableBlock table;
  table.header = {number_cell("Thin place"), number_cell("x, y, z mm"), number_cell("Patch mean mm"),
                  number_cell("Thinnest point mm"), number_cell("Area mm²")};
  table.shares = {0.14, 0.3, 0.2, 0.2, 0.16};
  for (std::size_t i = 0; i < std::min(walls.spots.size(), most_listed_spots); ++i) {
    const WallSpot& spot = walls.spots[i];
    table.rows.push_back({number_cell(std::to_string(i + 1)),
                          number_cell(position_text(spot.position_mm.data(), in.volume.geometry.voxel_mm())),
                          number_cell(number_text(spot.patch_mean_mm)),
                          number_cell(number_text(spot.least_mm)),
                          number_cell(number_text(spot.area_mm2, 3))});
  }
  section.blocks.push_back(table);
  return section;
}

Section caution_section(const Inspection& in) {
  Section section{"What was not searched, and cautions", {}};
  ListBlock list;
  for (const std::string& line : in.not_searched) list.items.push_back(one_line(line));
  list.items.push_back(
      "This report is a measurement, not a licence to release: acceptance stays with the responsible, "
      "qualified person under the drawing and the codes that apply.");
  list.items.push_back("X-ray work follows local radiation-protection rules.");
  section.blocks.push_back(list);
  return section;
}

}  // namespace

ReportContent report_content(const InspectionRun& run, const ReportFigures& figures,
                             const std::string& date) {
  const Inspection& in = run.inspection;
  ReportContent content;
  content.verdict = in.verdict;
  content.title = one_line(in.spec.title.empty() ? "Inspection report" : in.spec.title);
  content.subject = part_words(in);
  content.serial = one_line(in.serial);
  content.sentence = verdict_sentence(in);
  content.program = std::string(program_name()) + " " + program_version();
  content.sections.push_back(part_section(in, date));
  content.sections.push_back(requirement_section(in, figures.places));
  const std::vector<std::string> warnings = all_warnings(in);
  if (!warnings.empty()) content.sections.push_back({"Warnings", {ListBlock{warnings}}});
  content.sections.push_back(place_section(in, figures));
  content.sections.push_back(pore_section(in, figures));
  if (in.walls) content.sections.push_back(wall_section(in, figures));
  content.sections.push_back(method_section(in, figures));
  content.sections.push_back(caution_section(in));
  content.sections.push_back({"Release", {SignatureBlock{{"Name", "Date", "Signature"}}}});
  return content;
}

}  // namespace halfmark
