// The command `halfmark` as its users meet it: exit statuses, sentences, files left behind.
#include <signal.h>
#include <sys/wait.h>
#include <unistd.h>

#include <algorithm>
#include <array>
#include <chrono>
#include <cmath>
#include <cstdint>
#include <cstdio>
#include <filesystem>
#include <fstream>
#include <functional>
#include <iterator>
#include <nlohmann/json.hpp>
#include <string>
#include <thread>

#include "tests/support/catch.h"
#include "tests/support/temporary_folder.h"

namespace fs = std::filesystem;

namespace {

struct Outcome {
  int status = -1;
  std::string text;  // stdout and stderr
};

Outcome run_shell(const std::string& command) {
  Outcome out;
  FILE* pipe = ::popen((command + " 2>&1").c_str(), "r");
  REQUIRE(pipe != nullptr);
  std::array<char, 4096> chunk;
  for (std::size_t n; (n = std::fread(chunk.data(), 1, chunk.size(), pipe)) > 0;)
    out.text.append(chunk.data(), n);
  const int status = ::pclose(pipe);
  out.status = WIFEXITED(status) ? WEXITSTATUS(status) : 128 + WTERMSIG(status);
  return out;
}

Outcome run_halfmark(const std::string& arguments) {
  return run_shell(std::string("'") + HALFMARK_BINARY + "' " + arguments);
}

struct Folder : halfmark::TemporaryFolder {  // names as the command line takes them
  std::string operator/(const std::string& name) const { return (path() / name).string(); }
};

void write_text(const std::string& file, const std::string& text) {
  std::ofstream(file, std::ios::binary) << text;
}

std::string read_text(const std::string& file) {
  std::ifstream in(file, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

// An .mha of n cubed 16-bit voxels of 0.1 mm.
void write_volume(const std::string& file, int n, const std::function<double(int, int, int)>& grey) {
  std::ofstream out(file, std::ios::binary);
  out << "ObjectType = Image\nNDims = 3\nBinaryData = True\nBinaryDataByteOrderMSB = False\nCompressedData = "
         "False\n"
      << "ElementSpacing = 0.1 0.1 0.1\nDimSize = " << n << " " << n << " " << n
      << "\nElementType = MET_USHORT\nElementDataFile = LOCAL\n";
  std::uint64_t state = 7;
  for (int z = 0; z < n; ++z) {
    for (int y = 0; y < n; ++y) {
      for (int x = 0; x < n; ++x) {
        double noise = 0;  // sum of uniforms: near enough to a normal one
        for (int k = 0; k < 4; ++k) {
          state = state * 6364136223846793005ULL + 1442695040888963407ULL;
          noise += static_cast<double>(state >> 40) / 16777216.0 - 0.5;
        }
        const auto value = static_cast<std::uint16_t>(std::clamp(grey(x, y, z) + 1200 * noise, 0.0, 65535.0));
        out.write(reinterpret_cast<const char*>(&value), sizeof value);
      }
    }
  }
}

// A block with a round cavity of 12 voxels; edges smoothed over about a voxel.
double block_with_cavity(int x, int y, int z) {
  const double c = 32;
  const double to_face = 20.3 - std::max({std::abs(x - c), std::abs(y - c), std::abs(z - c)});
  const double to_cavity = std::sqrt((x - c) * (x - c) + (y - c) * (y - c) + (z - c) * (z - c)) - 6.0;
  const double inside = 0.5 * (1 + std::erf(std::min(to_face, to_cavity) / (0.9 * std::sqrt(2.0))));
  return 8000 + 32000 * inside;
}

const char* const sound_spec = R"({"spec_version": 1, "title": "block",
  "requirements": [{"id": "R1", "zone": "part", "quantity": "pore_diameter", "max": 3.0},
                   {"id": "R2", "zone": "part", "quantity": "porosity", "max": 5.0}]})";

bool only_hidden_or_nothing_left(const fs::path& folder) {
  return !fs::exists(folder) || fs::is_empty(folder);
}

}  // namespace

TEST_CASE("help, version and wrong usage") {
  CHECK(run_halfmark("--help").status == 0);
  CHECK(run_halfmark("--version").status == 0);
  CHECK(run_halfmark("inspect --help").text.find("--spec") != std::string::npos);
  CHECK(run_halfmark("").status == 64);
  CHECK(run_halfmark("inspct").status == 64);
  CHECK(run_halfmark("inspect volume.mha --spce s.json --out d").status == 64);
  CHECK(run_halfmark("demo --list").status == 0);
  CHECK(run_halfmark("demo no_such_part --out d").status == 64);
  CHECK(run_halfmark("levels x.mha --voxel-size 0").status == 64);
  CHECK(run_halfmark("levels x.mha --voxel-size 0.1,0.1").status == 64);
  CHECK(run_halfmark("levels x.mha --voxel-size nan").status == 64);
}

TEST_CASE("a missing volume and a missing spec are input missing") {
  const Folder folder;
  write_text(folder / "spec.json", sound_spec);
  const Outcome volume = run_halfmark("inspect " + (folder / "none.mha") + " --spec " +
                                      (folder / "spec.json") + " --out " + (folder / "out"));
  CHECK(volume.status == 66);
  CHECK(volume.text.find("none.mha") != std::string::npos);
  const Outcome spec = run_halfmark("inspect " + (folder / "none.mha") + " --spec " + (folder / "none.json") +
                                    " --out " + (folder / "out"));
  CHECK(spec.status == 66);
  CHECK_FALSE(fs::exists(folder / "out"));
}

TEST_CASE("volumes without two phases are bad data with one clear line") {
  const Folder folder;
  write_text(folder / "spec.json", sound_spec);
  write_volume(folder / "constant.mha", 24, [](int, int, int) { return 9000.0; });
  write_text(folder / "empty.mha", "");
  write_volume(folder / "noise.mha", 48, [](int, int, int) { return 20000.0; });
  for (const std::string name : {"constant.mha", "noise.mha", "empty.mha"}) {
    const Outcome outcome = run_halfmark("inspect " + (folder / name) + " --spec " + (folder / "spec.json") +
                                         " --out " + (folder / "out"));
    INFO(name << ": " << outcome.text);
    CHECK(outcome.status == 65);
    CHECK(std::count(outcome.text.begin(), outcome.text.end(), '\n') == 1);
    CHECK_FALSE(fs::exists(folder / "out"));
  }
}

TEST_CASE("every problem of a spec is named by its place") {
  const Folder folder;
  write_text(folder / "bad.json", R"({"spec_version": 1, "requirements": [
    {"id": "R1", "zone": "part", "quantity": "porositty", "max": 1},
    {"id": "R2", "zone": "nowhere", "quantity": "porosity", "max": "1"},
    {"id": "R3", "zone": "part", "quantity": "porosity", "maximum": 1}]})");
  const Outcome outcome = run_halfmark("spec check " + (folder / "bad.json"));
  INFO(outcome.text);
  CHECK(outcome.status == 65);
  for (const char* words : {"R1", "porosity", "R2", "R3", "max"})
    CHECK(outcome.text.find(words) != std::string::npos);
  write_text(folder / "none.json", R"({"spec_version": 1, "requirements": []})");
  CHECK(run_halfmark("spec check " + (folder / "none.json")).status == 65);
  write_text(folder / "good.json", sound_spec);
  CHECK(run_halfmark("spec check " + (folder / "good.json")).status == 0);
}

TEST_CASE("the spec's schema is printed whole") {
  const Outcome outcome = run_halfmark("spec schema");
  CHECK(outcome.status == 0);
  std::ifstream file(HALFMARK_SOURCE_DIR "/io/spec.schema.json");
  CHECK(outcome.text == std::string(std::istreambuf_iterator<char>(file), {}));
}

TEST_CASE("an inspection gives its verdict as exit status, and the same bytes each time") {
  const Folder folder;
  write_text(folder / "spec.json", sound_spec);
  write_text(
      folder / "strict.json",
      R"({"spec_version": 1, "requirements": [{"id": "R1", "zone": "part", "quantity": "pore_diameter", "max": 0.5}]})");
  write_volume(folder / "block.mha", 64, block_with_cavity);
  const auto inspect = [&](const std::string& spec, const std::string& out, const std::string& more) {
    return run_halfmark("inspect " + (folder / "block.mha") + " --spec " + (folder / spec) + " --out " +
                        (folder / out) + " " + more);
  };
  const Outcome accepted = inspect("spec.json", "a", "--serial 17 --threads 1");
  INFO(accepted.text);
  REQUIRE(accepted.status == 0);
  CHECK(inspect("strict.json", "strict", "").status == 1);
  REQUIRE(inspect("spec.json", "b", "--serial 17 --threads 2").status == 0);
  for (const std::string name : {"result.json", "pores.csv", "report.html"}) {
    INFO(name);
    CHECK_FALSE(read_text(folder / ("a/" + name)).empty());
    CHECK((read_text(folder / ("a/" + name)) == read_text(folder / ("b/" + name))));
  }
  CHECK(read_text(folder / "a/report.pdf").substr(0, 5) == "%PDF-");

  const auto result = nlohmann::json::parse(read_text(folder / "a/result.json"));
  CHECK(result["verdict"] == "accept");
  CHECK(result["serial"] == "17");
  CHECK(result["pores"]["count"] == 1);
  const double diameter = result["requirements"][0]["measured"], truth = 1.2;
  INFO("diameter " << diameter << " mm, truth " << truth << " mm, difference " << (diameter - truth) / 0.1
                   << " voxels");
  CHECK(std::abs(diameter - truth) < 0.03);
}

TEST_CASE("output that cannot be made is told before the long work") {
  const Folder folder;
  write_text(folder / "spec.json", sound_spec);
  write_volume(folder / "block.mha", 64, block_with_cavity);
  write_text(folder / "taken", "x");
  const std::string start =
      "inspect " + (folder / "block.mha") + " --spec " + (folder / "spec.json") + " --out ";
  CHECK(run_halfmark(start + (folder / "taken")).status == 73);
  CHECK(run_halfmark(start + "/proc/halfmark_out").status == 73);
}

TEST_CASE("running out of space leaves nothing behind") {
  const Folder folder;
  write_text(folder / "spec.json", sound_spec);
  write_volume(folder / "block.mha", 64, block_with_cavity);
  // A limit on file sizes (in blocks of 512 or 1024 bytes) refuses bytes as a full disk does.
  const Outcome outcome =
      run_shell("trap '' XFSZ; ulimit -f 4; '" + std::string(HALFMARK_BINARY) + "' inspect " +
                (folder / "block.mha") + " --spec " + (folder / "spec.json") + " --out " + (folder / "out"));
  INFO(outcome.text);
  CHECK(outcome.status == 74);
  CHECK(only_hidden_or_nothing_left(folder / "out"));
}

TEST_CASE("an interrupt at any moment ends with 130 and leaves nothing behind") {
  const Folder folder;
  write_text(folder / "spec.json", sound_spec);
  write_volume(folder / "block.mha", 160,
               [](int x, int y, int z) { return block_with_cavity(x / 2 - 8, y / 2 - 8, z / 2 - 8); });
  int interrupted = 0;
  for (int delay_ms = 5; delay_ms < 1500; delay_ms = delay_ms * 3 / 2 + 10) {
    const std::string out = folder / ("out" + std::to_string(delay_ms));
    const pid_t child = ::fork();
    REQUIRE(child >= 0);
    if (child == 0) {
      std::freopen("/dev/null", "w", stdout);
      std::freopen("/dev/null", "w", stderr);
      ::execl(HALFMARK_BINARY, "halfmark", "inspect", (folder / "block.mha").c_str(), "--spec",
              (folder / "spec.json").c_str(), "--out", out.c_str(), static_cast<char*>(nullptr));
      ::_exit(99);
    }
    std::this_thread::sleep_for(std::chrono::milliseconds(delay_ms));
    ::kill(child, SIGINT);
    int status = 0;
    ::waitpid(child, &status, 0);
    INFO("interrupted after " << delay_ms << " ms; status " << status);
    // Before the handler is set, the signal itself ends the program.
    const bool by_signal = WIFSIGNALED(status) && WTERMSIG(status) == SIGINT;
    const int code = WIFEXITED(status) ? WEXITSTATUS(status) : -1;
    const bool finished = code == 0 || code == 1 || code == 2;
    CHECK((by_signal || code == 130 || finished));
    if (code == 130 || by_signal) {
      ++interrupted;
      CHECK(only_hidden_or_nothing_left(out));
    }
  }
  CHECK(interrupted > 0);
}

TEST_CASE("exclusions are read, applied and reported") {
  const Folder folder;
  write_text(
      folder / "strict.json",
      R"({"spec_version": 1, "requirements": [{"id": "R1", "zone": "part", "quantity": "pore_diameter", "max": 0.5}]})");
  write_volume(folder / "block.mha", 64, block_with_cavity);
  write_text(folder / "d.json", R"({"dispositions_version": 1, "dispositions": [
    {"position_mm": [3.2, 3.2, 3.2], "tolerance_mm": 0.3, "reason": "machined away", "by": "inspector", "when": "2026-01-31"}]})");
  const std::string start = "inspect " + (folder / "block.mha") + " --spec " + (folder / "strict.json") +
                            " --out " + (folder / "out");
  const Outcome outcome = run_halfmark(start + " --dispositions " + (folder / "d.json"));
  INFO(outcome.text);
  CHECK(outcome.status == 0);
  CHECK(read_text(folder / "out/report.html").find("machined away") != std::string::npos);
  write_text(
      folder / "bad.json",
      R"({"dispositions_version": 1, "dispositions": [{"position_mm": [1, 2], "tolerance_mm": 0.3}]})");
  CHECK(run_halfmark(start + " --dispositions " + (folder / "bad.json")).status == 65);
  CHECK(run_halfmark(start + " --dispositions " + (folder / "none.json")).status == 66);
}
