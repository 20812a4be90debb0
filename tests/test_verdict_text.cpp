// The verdict in words and the rounding of numbers.
#include "analysis/number_text.h"
#include "reports/requirement_text.h"
#include "reports/verdict_text.h"
#include "tests/support/catch.h"
#include "tests/support/sample_run.h"

using namespace halfmark;

TEST_CASE("Numbers are rounded to what their uncertainty leaves") {
  CHECK(measured_text(0.61834, 0.0512, "%") == "0.618 ± 0.051 %");
  CHECK(measured_text(1234.5, 340, "mm³") == "1230 ± 340 mm³");
  CHECK(measured_text(3, 0, "") == "3");
  CHECK(measured_text(not_measured, 1, "mm") == "–");
  CHECK(number_text(0.0000124) == "0.0000124");
  CHECK(number_text(1240) == "1240");
  CHECK(number_text(-0.0) == "0");
  CHECK(number_text(1e300).size() == 301);
  CHECK(number_text(2.5) == "2.5");
  CHECK(number_text(99999.6, 4) == "100000");
}

TEST_CASE("The terminal summary tells verdict, value, limit and reason of each requirement") {
  const MemoryVolume volume = sample::volume();
  Inspection in = sample::run(volume).inspection;
  const std::string text = verdict_text(in);
  CHECK(text.find("REJECT  plate, drawing P-77, revision A, serial SN-0042") == 0);
  for (const char* part : {"R1  reject", "1.200 ± 0.020 mm", "at most 0.8 mm", "against the limit",
                           "3 pores: 3 closed", "porosity 0.760 ± 0.020 %", "R2: the limit lies close"}) {
    CAPTURE(part, text);
    CHECK(text.find(part) != std::string::npos);
  }
  in.serial = "\x1b[31mred\x07\xc2\x9b";
  CHECK(verdict_text(in).find('\x1b') == std::string::npos);
  CHECK(verdict_text(in).find('\x07') == std::string::npos);
  CHECK(verdict_text(in).find("\xc2\x9b") == std::string::npos);
}

TEST_CASE("Limits and margins have their good side") {
  RequirementResult r;
  r.has_value = true;
  r.unit = "mm";
  r.measured.value = 2;
  r.requirement.min = 1.8;
  CHECK(limit_words(r) == "at least 1.8 mm");
  CHECK(margin_words(r) == "+0.2 mm");
  r.requirement.max = 2.1;
  CHECK(limit_words(r) == "1.8 to 2.1 mm");
  CHECK(margin(r) == Approx(0.1));
  r.measured.value = 2.5;
  CHECK(margin_words(r) == "−0.4 mm");
  r.has_value = false;
  CHECK(value_words(r) == "not measured");
}
