#include "reports/verdict_text.h"

#include <algorithm>
#include <array>

#include "analysis/number_text.h"
#include "reports/requirement_text.h"

namespace halfmark {

namespace {

// Characters, not bytes: continuation bytes of UTF-8 take no column.
std::size_t columns(const std::string& text) {
  return static_cast<std::size_t>(std::count_if(
      text.begin(), text.end(), [](char c) { return (static_cast<unsigned char>(c) & 0xc0) != 0x80; }));
}

std::string padded(const std::string& text, std::size_t width) {
  return text + std::string(width > columns(text) ? width - columns(text) : 0, ' ');
}

std::string upper(std::string text) {
  for (char& c : text)
    if (c >= 'a' && c <= 'z') c = static_cast<char>(c - 'a' + 'A');
  return text;
}

using Row = std::array<std::string, 5>;

Row row_of(const RequirementResult& r) {
  return {one_line(r.requirement.id), to_text(r.verdict), requirement_words(r.requirement), value_words(r),
          limit_words(r)};
}

void add_requirements(const Inspection& inspection, std::string& text) {
  std::array<std::size_t, 5> width{};
  for (const RequirementResult& r : inspection.requirements) {
    const Row row = row_of(r);
    for (std::size_t i = 0; i < row.size(); ++i) width[i] = std::max(width[i], columns(row[i]));
  }
  for (const RequirementResult& r : inspection.requirements) {
    const Row row = row_of(r);
    text += " ";
    for (std::size_t i = 0; i + 1 < row.size(); ++i) text += " " + padded(row[i], width[i]) + " ";
    text += " " + row.back() + "\n";
    if (!r.reason.empty()) text += "  " + std::string(width[0], ' ') + "  " + one_line(r.reason) + "\n";
  }
}

void add_list(const char* heading, const std::vector<std::string>& lines, std::string& text) {
  if (lines.empty()) return;
  text += std::string("\n") + heading + "\n";
  for (const std::string& line : lines) text += "  - " + one_line(line) + "\n";
}

}  // namespace

std::string verdict_text(const Inspection& inspection) {
  std::string text = upper(to_text(inspection.verdict));
  const std::string part = part_words(inspection);
  if (!part.empty()) text += "  " + part;
  if (!inspection.serial.empty()) text += ", serial " + one_line(inspection.serial);
  text += "\n\n";
  add_requirements(inspection, text);
  text += "\n" + pore_words(inspection) + "\n";
  if (inspection.pore_summary.smallest_expected_diameter_mm > 0) {
    text += "Smallest pore this scan is expected to show: " +
            number_text(inspection.pore_summary.smallest_expected_diameter_mm, 2) + " mm across\n";
  }
  add_list("Warnings", all_warnings(inspection), text);
  return text;
}

}  // namespace halfmark
