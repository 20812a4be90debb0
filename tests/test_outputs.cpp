// Everything inspect writes: complete, the same twice, and all or nothing.
#include <oneapi/tbb/global_control.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include <array>
#include <cstdio>
#include <fstream>
#include <sstream>

#include "reports/outputs.h"
#include "tests/support/catch.h"
#include "tests/support/sample_run.h"
#include "tests/support/temporary_folder.h"

using namespace halfmark;
namespace fs = std::filesystem;

namespace {

const MemoryVolume& volume() {
  static const MemoryVolume v = sample::volume();
  return v;
}

std::string bytes_of(const fs::path& path) {
  std::ifstream file(path, std::ios::binary);
  std::ostringstream bytes;
  bytes << file.rdbuf();
  return bytes.str();
}

std::size_t entries(const fs::path& folder) {
  std::size_t n = 0;
  for ([[maybe_unused]] const auto& entry : fs::directory_iterator(folder)) ++n;
  return n;
}

ExitStatus status_of(const fs::path& folder, const OutputOptions& options = {},
                     const RunControl& control = {}) {
  try {
    write_outputs(sample::run(volume()), volume(), folder, options, control);
  } catch (const Problem& problem) {
    return problem.status();
  }
  return ExitStatus::accept;
}

std::string output_of(const std::string& command) {
  std::string text;
  FILE* pipe = ::popen(command.c_str(), "r");
  if (!pipe) return text;
  std::array<char, 4096> buffer;
  while (const std::size_t n = std::fread(buffer.data(), 1, buffer.size(), pipe))
    text.append(buffer.data(), n);
  ::pclose(pipe);
  return text;
}

}  // namespace

TEST_CASE("All files appear, and again with one thread byte for byte but the PDF") {
  const TemporaryFolder folder;
  OutputOptions options;
  options.write = {"surface", "pores", "labels"};
  for (const int threads : {2, 1}) {
    const oneapi::tbb::global_control limit(oneapi::tbb::global_control::max_allowed_parallelism,
                                            std::size_t(threads));
    write_outputs(sample::run(volume()), volume(), folder / std::to_string(threads), options);
  }
  for (const char* name :
       {"result.json", "pores.csv", "report.html", "report.pdf", "surface.stl", "pores.vtp", "labels.mha"}) {
    CAPTURE(name);
    REQUIRE(fs::exists(folder / "1" / name));
    CHECK(fs::file_size(folder / "1" / name) > 100);
    if (std::string(name) != "report.pdf")
      CHECK(bytes_of(folder / "1" / name) == bytes_of(folder / "2" / name));
  }
  CHECK(entries(folder / "1") == 7);
}

TEST_CASE("The PDF opens and holds verdict, serial number and page numbers") {
  if (std::system("command -v pdftotext >/dev/null 2>&1") != 0) {
    WARN("pdftotext is not installed");
    return;
  }
  const TemporaryFolder folder;
  OutputOptions options;
  options.html = false;
  write_outputs(sample::run(volume()), volume(), folder.path(), options);
  CHECK(!fs::exists(folder / "report.html"));
  const std::string text = output_of("pdftotext -layout '" + (folder / "report.pdf").string() + "' -");
  for (const char* part :
       {"Reject", "SN-0042", "R1", "at most 0.8 mm", "Page 1 of ", "Signature", "undecided"}) {
    CAPTURE(part);
    CHECK(text.find(part) != std::string::npos);
  }
}

TEST_CASE("Nothing stays behind when it goes wrong") {
  const TemporaryFolder folder;
  std::ofstream(folder / "file") << "x";
  CHECK(status_of(folder / "file" / "out") == ExitStatus::cannot_create);
  CHECK(status_of(folder / "file") == ExitStatus::cannot_create);
  OutputOptions thickness;
  thickness.write = {"thickness"};
  CHECK(status_of(folder / "walls", thickness) == ExitStatus::usage);
  OutputOptions unknown;
  unknown.write = {"everything"};
  CHECK(status_of(folder / "unknown", unknown) == ExitStatus::usage);
  RunControl cancelled;
  cancelled.cancel();
  CHECK(status_of(folder / "cancelled", {}, cancelled) == ExitStatus::interrupted);
  CHECK(entries(folder.path()) == 1);
}

TEST_CASE("A failed run leaves the former results as they were") {
  const TemporaryFolder folder;
  CHECK(status_of(folder.path()) == ExitStatus::accept);
  const std::string before = bytes_of(folder / "result.json");
  const std::size_t count = entries(folder.path());
  // Cancelled when most is written.
  RunControl* handle = nullptr;
  RunControl control([&](const std::string&, double fraction) {
    if (fraction >= 0.9) handle->cancel();
  });
  handle = &control;
  CHECK(status_of(folder.path(), {}, control) == ExitStatus::interrupted);
  CHECK(bytes_of(folder / "result.json") == before);
  CHECK(entries(folder.path()) == count);
}

TEST_CASE("A folder without write permission is named") {
  if (::geteuid() == 0) return;  // root may write everywhere
  const TemporaryFolder folder;
  ::chmod(folder.path().c_str(), 0500);
  CHECK(status_of(folder / "out") == ExitStatus::cannot_create);
  ::chmod(folder.path().c_str(), 0700);
}

TEST_CASE("A date stands in the report only when asked for") {
  const TemporaryFolder folder;
  OutputOptions options;
  options.pdf = false;
  write_outputs(sample::run(volume()), volume(), folder.path(), options);
  CHECK(bytes_of(folder / "report.html").find(">Written<") == std::string::npos);
  options.timestamp = true;
  write_outputs(sample::run(volume()), volume(), folder.path(), options);
  CHECK(bytes_of(folder / "report.html").find(">Written<") != std::string::npos);
}
