// pores.csv: its columns, its numbers, its quoting, and no cell that starts a formula.
#include <algorithm>
#include <clocale>
#include <sstream>

#include "reports/pore_table_csv.h"
#include "tests/support/catch.h"
#include "tests/support/sample_run.h"

using namespace halfmark;

namespace {

// A reader of its own: RFC 4180.
std::vector<std::vector<std::string>> parse(const std::string& text, char separator) {
  std::vector<std::vector<std::string>> rows{{""}};
  bool quoted = false;
  for (std::size_t i = 0; i < text.size(); ++i) {
    const char c = text[i];
    if (quoted) {
      if (c != '"')
        rows.back().back() += c;
      else if (i + 1 < text.size() && text[i + 1] == '"')
        rows.back().back() += text[++i];
      else
        quoted = false;
    } else if (c == '"') {
      quoted = true;
    } else if (c == separator) {
      rows.back().emplace_back();
    } else if (c == '\n') {
      rows.push_back({""});
    } else {
      rows.back().back() += c;
    }
  }
  rows.pop_back();
  return rows;
}

Inspection inspection() {
  static const MemoryVolume volume = sample::volume();
  return sample::run(volume).inspection;
}

std::string cell(const std::vector<std::vector<std::string>>& rows, std::size_t row,
                 const std::string& column) {
  const auto at = std::find(rows[0].begin(), rows[0].end(), column);
  REQUIRE(at != rows[0].end());
  return rows[row][std::size_t(at - rows[0].begin())];
}

bool is_number(const std::string& text) {
  return !text.empty() && text.find_first_not_of("0123456789.,", text[0] == '-' ? 1 : 0) == std::string::npos;
}

}  // namespace

TEST_CASE("The columns are the documented ones and the largest pore comes first") {
  Inspection in = inspection();
  std::swap(in.pores[0], in.pores[2]);
  const auto rows = parse(pores_to_csv(in), ',');
  REQUIRE(rows.size() == 4);
  std::string header;
  for (const std::string& name : rows[0]) header += (header.empty() ? "" : ",") + name;
  CHECK(
      header ==
      "pore_id,kind,shape_class,x_mm,y_mm,z_mm,volume_mm3,volume_uncertainty_mm3,equivalent_diameter_mm,"
      "length_mm,"
      "width_mm,thickness_mm,surface_area_mm2,sphericity,depth_mm,spacing_mm,mean_grey,contrast,voxels,open,"
      "cut_by_field,zones,verdict");
  for (const auto& row : rows) CHECK(row.size() == rows[0].size());
  CHECK(cell(rows, 1, "pore_id") == "1");
  CHECK(cell(rows, 3, "pore_id") == "3");
  CHECK(std::stod(cell(rows, 1, "volume_mm3")) == Approx(in.pores[2].volume_mm3.value).epsilon(1e-5));
  CHECK(cell(rows, 1, "zones") == "part|left");
  CHECK(cell(rows, 1, "verdict") == "reject");
  CHECK(cell(rows, 3, "sphericity").empty());
  CHECK(cell(rows, 1, "spacing_mm").empty());
}

TEST_CASE("The semicolon variant has decimal commas and the same numbers") {
  const Inspection in = inspection();
  const auto plain = parse(pores_to_csv(in), ','), office = parse(pores_to_csv(in, true), ';');
  REQUIRE(office.size() == plain.size());
  for (std::size_t r = 0; r < plain.size(); ++r) {
    REQUIRE(office[r].size() == plain[r].size());
    for (std::size_t c = 0; c < plain[r].size(); ++c) {
      std::string expected = plain[r][c];
      if (is_number(expected)) std::replace(expected.begin(), expected.end(), '.', ',');
      CHECK(office[r][c] == expected);
    }
  }
}

TEST_CASE("No cell starts a formula and hostile zone names survive parsing") {
  Inspection in = inspection();
  const std::vector<std::string> hostile{"=1+1", "+1",      "-1",        "@SUM(A1)",    "\t=1",
                                         "\r=1", "  =1+1",  "a,b;\"c\"", "line\nbreak", "",
                                         "x|y",  "'quoted", "\xff\xfe"};
  for (const std::string& zone : hostile) {
    in.pores[0].zones = {zone};
    in.pores[0].centre_mm = {-1.25, 1e-7, -1e-9};
    for (const bool semicolon : {false, true}) {
      const auto rows = parse(pores_to_csv(in, semicolon), semicolon ? ';' : ',');
      REQUIRE(rows.size() == 4);
      for (const auto& row : rows) {
        REQUIRE(row.size() == 23);
        for (const std::string& text : row) {
          CAPTURE(zone, text);
          const std::size_t first = text.find_first_not_of(' ');
          const bool starts =
              first != std::string::npos && std::string("=+-@\t\r").find(text[first]) != std::string::npos;
          CHECK((!starts || is_number(text)));
          CHECK(text.find('\n') == std::string::npos);
        }
      }
    }
  }
  in.pores[0].zones = {"a|b", "c"};
  CHECK(cell(parse(pores_to_csv(in), ','), 1, "zones") == "a/b|c");
}

TEST_CASE("The locale changes no byte") {
  const std::string plain = pores_to_csv(inspection());
  const char* found = nullptr;
  for (const char* name : {"de_DE.UTF-8", "fr_FR.UTF-8", "C.UTF-8"})
    if (!found) found = std::setlocale(LC_ALL, name);
  CHECK(pores_to_csv(inspection()) == plain);
  std::setlocale(LC_ALL, "C");
}

TEST_CASE("An inspection without pores has the header alone") {
  Inspection in = inspection();
  in.pores.clear();
  CHECK(parse(pores_to_csv(in), ',').size() == 1);
}
