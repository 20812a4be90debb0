// report.html: escapes what comes from files, needs nothing from outside, says what it must.
#include "reports/figures.h"
#include "reports/report_html.h"
#include "tests/support/catch.h"
#include "tests/support/sample_run.h"

using namespace halfmark;

namespace {

const MemoryVolume& volume() {
  static const MemoryVolume v = sample::volume();
  return v;
}

std::string html_of(const InspectionRun& run) {
  return report_to_html(report_content(run, make_figures(run, volume())));
}

bool has(const std::string& text, const std::string& part) { return text.find(part) != std::string::npos; }

std::size_t count(const std::string& text, const std::string& part) {
  std::size_t n = 0;
  for (std::size_t at = text.find(part); at != std::string::npos; at = text.find(part, at + 1)) ++n;
  return n;
}

}  // namespace

TEST_CASE(
    "The report says the verdict first, then requirements, evidence, method, cautions and a line to sign") {
  const InspectionRun run = sample::run(volume());
  const std::string html = html_of(run);
  std::size_t last = 0;
  for (const char* part :
       {">Reject<", "Not met: R1.", "SN-0042", "Largest pore diameter in part", "at most 0.8 mm",
        "1.200 ± 0.020 mm", "Deciding places", "A: R1, pore 1", "How it was measured", "Contrast-to-noise",
        "Voids thinner than one voxel", "not a licence to release", "radiation-protection", "Signature"}) {
    CAPTURE(part);
    last = html.find(part, last);
    REQUIRE(last != std::string::npos);
  }
  CHECK(has(html, std::string(64, 'a')));
  CHECK(has(html, "voltage kv"));
  CHECK(count(html, "<img ") == 6);
}

TEST_CASE("The report is one file: every picture is inside and nothing is fetched or run") {
  const std::string html = html_of(sample::run(volume()));
  CHECK(count(html, " src=\"") == count(html, " src=\"data:image/png;base64,"));
  for (const char* part : {"<script", "http://", "https://", "url(", "<link", "@import", "<iframe"}) {
    CAPTURE(part);
    CHECK(!has(html, part));
  }
}

TEST_CASE("Text from files cannot become markup") {
  InspectionRun run = sample::run(volume());
  const std::string hostile = "<script>alert('x')</script>\"><img src=x onerror=y>&amp;\x80\xc3";
  Inspection& in = run.inspection;
  in.serial = in.spec.title = in.spec.part.name = in.spec.part.drawing = in.volume.file = hostile;
  in.volume.format = in.volume.voxel_type = in.volume.sha256 = in.spec.sha256 = hostile;
  in.volume.scan = {{hostile, hostile}};
  in.settings = {{hostile, hostile}};
  in.warnings = in.not_searched = in.grey_levels.warnings = {hostile};
  in.grey_levels.source = hostile;
  for (RequirementResult& r : in.requirements) {
    r.requirement.id = r.requirement.zone = r.unit = r.reason = r.evidence.what = hostile;
    r.warnings = {hostile};
  }
  for (Pore& p : in.pores) {
    p.zones = {hostile};
    p.disposition = hostile;
  }
  const std::string html = html_of(run);
  CHECK(!has(html, "<script"));
  CHECK(!has(html, "<img src=x"));
  CHECK(!has(html, "\"><img src=x"));
  CHECK(has(html, "&lt;script&gt;"));
  CHECK(count(html, "<img ") == 6);
  CHECK(html_escaped("a&b<c>\"d\"'e'") == "a&amp;b&lt;c&gt;&quot;d&quot;&#39;e&#39;");
}

TEST_CASE("Equal input gives equal bytes") {
  const InspectionRun run = sample::run(volume());
  CHECK(html_of(run) == html_of(run));
}

TEST_CASE("A report of nothing is still a report") {
  InspectionRun run;
  run.inspection.volume.geometry = volume().geometry();
  const std::string html = html_of(run);
  CHECK(has(html, ">Undecided<"));
  CHECK(has(html, "No requirement was checked."));
}
