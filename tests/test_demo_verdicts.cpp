// The whole way: a demo part is written, read back, inspected, and the result compared with its truth.

#include <cstring>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <string>
#include <vector>

#include "analysis/inspection.h"
#include "demo_volumes/demo_part.h"
#include "reports/report_json.h"
#include "tests/support/catch.h"
#include "tests/support/temporary_folder.h"

using namespace halfmark;
namespace fs = std::filesystem;

namespace {

std::string text_of(const fs::path& file) {
  std::ifstream in(file, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

void check_demo(const std::string& name) {
  const TemporaryFolder folder;
  const DemoPart part = demo_part(name);
  write_demo(part, folder.path());
  CHECK(std::distance(fs::directory_iterator(folder.path()), {}) == 3);
  CHECK(text_of(folder / (name + ".truth.json")) == part.truth_json);

  const OpenedVolume volume = open_volume(folder / (name + ".mha"));
  REQUIRE(volume.source->geometry().size == part.geometry.size);
  const auto middle = part.geometry.index_to_mm({11, 22, 33});
  CHECK(length(volume.source->geometry().index_to_mm({11, 22, 33}) - middle) < 1e-9);
  const InspectionSpec spec = read_spec(folder / (name + ".spec.json"));
  const InspectionRun run = inspect(volume, spec);
  const std::string differences = compare_with_truth(result_to_json(run.inspection), part.truth_json);
  INFO(name << ", differences from the truth:\n" << differences);
  CHECK(differences.empty());
}

}  // namespace

TEST_CASE("the bracket is rejected for the reasons its truth gives") { check_demo("bracket"); }
TEST_CASE("the grille stays undecided as its truth says") { check_demo("grille"); }
TEST_CASE("the sound block is accepted") { check_demo("sound_block"); }

TEST_CASE("a demo volume written slab by slab is the one rendered at once") {
  const TemporaryFolder folder;
  const DemoPart part = demo_part("casting", {1, 100});
  write_demo(part, folder.path());
  const OpenedVolume volume = open_volume(folder / "casting.mha");
  const MemoryVolume rendered = render_scan(part.bodies, part.geometry, part.scan);
  std::vector<std::byte> read(static_cast<std::size_t>(part.geometry.voxel_count()) * 2);
  volume.source->read_planes(0, 100, read.data());
  CHECK(std::memcmp(read.data(), rendered.resident(), read.size()) == 0);
}
