#include <unistd.h>

#include <fstream>
#include <iterator>

#include "io/output_file.h"
#include "io/problem.h"
#include "tests/support/catch.h"
#include "tests/support/temporary_folder.h"

namespace fs = std::filesystem;
using halfmark::OutputSet;
using halfmark::TemporaryFolder;

namespace {

std::string text_of(const fs::path& file) {
  std::ifstream in(file, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

}  // namespace

TEST_CASE("outputs appear together on commit") {
  const TemporaryFolder folder;
  const fs::path out = folder / "a" / "b";
  OutputSet set;
  set.make_folder(out);
  set.write(out / "one.txt", "one");
  set.write(out / "two.txt", "two");
  CHECK_FALSE(fs::exists(out / "one.txt"));
  set.commit();
  CHECK(text_of(out / "one.txt") == "one");
  CHECK(text_of(out / "two.txt") == "two");
  CHECK(std::distance(fs::directory_iterator(out), {}) == 2);
}

TEST_CASE("nothing stays behind without commit") {
  const TemporaryFolder folder;
  const fs::path out = folder / "a" / "b";
  {
    OutputSet set;
    set.make_folder(out);
    set.write(out / "one.txt", "one");
  }
  CHECK(fs::is_empty(folder.path()));
}

TEST_CASE("a file in the folder's place is named") {
  const TemporaryFolder folder;
  std::ofstream(folder / "taken") << "x";
  OutputSet set;
  try {
    set.make_folder(folder / "taken" / "inner");
    FAIL("no problem was thrown");
  } catch (const halfmark::Problem& problem) {
    CHECK(problem.status() == halfmark::ExitStatus::cannot_create);
    CHECK(std::string(problem.what()).find("taken") != std::string::npos);
  }
}

TEST_CASE("a full disk is an I/O error that names the file") {
  OutputSet set;
  if (::access("/dev/full", W_OK) != 0) return;
  // /dev/full refuses every byte; the set's temporary would not lie there, so a link does.
  const TemporaryFolder folder;
  const fs::path final_name = folder / "full.txt";
  const fs::path temporary = folder / ("." + std::to_string(::getpid()) + ".part.full.txt");
  fs::create_symlink("/dev/full", temporary);
  try {
    set.write(final_name, "bytes");
    FAIL("no problem was thrown");
  } catch (const halfmark::Problem& problem) {
    CHECK(problem.status() == halfmark::ExitStatus::io_error);
    CHECK(std::string(problem.what()).find("full.txt") != std::string::npos);
  }
}
