#include <fstream>
#include "support/catch.h"
#include "support/sample_run.h"
#include "reports/chart_figure.h"
#include "reports/part_figure.h"
#include "reports/slice_figure.h"
using namespace halfmark;
TEST_CASE("look") {
  const MemoryVolume volume = sample::volume();
  InspectionRun run = sample::run(volume);
  const auto places = evidence_places(run.inspection);
  const auto save = [](const char* name, const Figure& f) { std::ofstream(std::string("build/look_") + name + ".png", std::ios::binary) << f.picture.png; };
  const auto s = slice_figures(run, volume, places);
  save("detail", s[0].detail); save("overview", s[0].overview); save("detail2", s[1].detail);
  save("part", part_figure(run, volume.geometry(), places));
  save("sizes", pore_size_figure(run.inspection));
  save("grey", grey_histogram_figure(run.inspection));
  CHECK(true);
}
