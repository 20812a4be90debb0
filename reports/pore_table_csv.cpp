#include "reports/pore_table_csv.h"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>

#include "analysis/number_text.h"

namespace halfmark {

namespace {

constexpr int significant_digits = 6;

constexpr const char* columns =
    "pore_id,kind,shape_class,x_mm,y_mm,z_mm,volume_mm3,volume_uncertainty_mm3,equivalent_diameter_mm,length_"
    "mm,"
    "width_mm,thickness_mm,surface_area_mm2,sphericity,depth_mm,spacing_mm,mean_grey,contrast,voxels,open,"
    "cut_by_field,zones,verdict";

class CsvWriter {
 public:
  explicit CsvWriter(bool semicolon) : separator_(semicolon ? ';' : ','), comma_(semicolon) {}

  void header() {
    std::string line = columns;
    std::replace(line.begin(), line.end(), ',', separator_);
    out_ += line + "\n";
  }
  void number(double value) { cell(std::isfinite(value) ? digits(value) : ""); }
  void integer(std::int64_t value) { cell(std::to_string(value)); }
  void flag(bool value) { cell(value ? "1" : "0"); }
  void text(const std::string& raw) {
    std::string safe = one_line(raw);
    const std::size_t first = safe.find_first_not_of(' ');
    const bool formula =
        first != std::string::npos && std::string("=+-@").find(safe[first]) != std::string::npos;
    if (formula || (!raw.empty() && static_cast<unsigned char>(raw[0]) < 0x20)) safe.insert(0, "'");
    cell(quoted(safe));
  }
  void end_line() {
    out_ += '\n';
    first_ = true;
  }
  std::string take() { return std::move(out_); }

 private:
  void cell(const std::string& text) {
    if (!first_) out_ += separator_;
    first_ = false;
    out_ += text;
  }
  std::string digits(double value) const {
    std::string text = number_text(value, significant_digits);
    if (comma_) std::replace(text.begin(), text.end(), '.', ',');
    return text;
  }
  std::string quoted(const std::string& text) const {
    if (text.find_first_of(std::string("\"\r\n,;")) == std::string::npos) return text;
    std::string q = "\"";
    for (const char c : text) q += c == '"' ? std::string("\"\"") : std::string(1, c);
    return q + "\"";
  }

  char separator_;
  bool comma_, first_ = true;
  std::string out_;
};

std::string zones_of(const Pore& pore) {
  std::string all;
  for (std::string zone : pore.zones) {
    std::replace(zone.begin(), zone.end(), '|', '/');  // '|' parts the zones
    all += (all.empty() ? "" : "|") + zone;
  }
  return all;
}

void write_pore(const Pore& p, CsvWriter& csv) {
  csv.integer(p.id);
  csv.text(to_text(p.kind));
  csv.text(to_text(p.shape));
  for (const double x : p.centre_mm) csv.number(x);
  csv.number(p.volume_mm3.value);
  csv.number(p.volume_mm3.standard_uncertainty);
  for (const double x : {p.equivalent_diameter_mm, p.length_mm, p.width_mm, p.thickness_mm,
                         p.surface_area_mm2, p.sphericity, p.depth_mm, p.spacing_mm, p.mean_grey, p.contrast})
    csv.number(x);
  csv.integer(p.voxels);
  csv.flag(p.open);
  csv.flag(p.cut_by_field);
  csv.text(zones_of(p));
  csv.text(to_text(p.verdict));
  csv.end_line();
}

}  // namespace

std::string pores_to_csv(const Inspection& inspection, bool semicolon) {
  std::vector<const Pore*> order;
  for (const Pore& pore : inspection.pores) order.push_back(&pore);
  std::stable_sort(order.begin(), order.end(),
                   [](const Pore* a, const Pore* b) { return a->volume_mm3.value > b->volume_mm3.value; });
  CsvWriter csv(semicolon);
  csv.header();
  for (const Pore* pore : order) write_pore(*pore, csv);
  return csv.take();
}

}  // namespace halfmark
