// demo_check RESULT.json TRUTH.json [STATUS]: does an inspection's result, and its exit status, say what the
// demo part's truth expects? Ends with 0 if so, with 1 and the differences if not.
#include <cstdio>
#include <fstream>
#include <iterator>
#include <nlohmann/json.hpp>
#include <string>

#include "demo_volumes/demo_part.h"
#include "io/problem.h"

namespace {

std::string text_of(const char* path) {
  std::ifstream in(path, std::ios::binary);
  if (!in)
    throw halfmark::Problem(halfmark::ExitStatus::input_missing, std::string(path) + " cannot be read");
  return {std::istreambuf_iterator<char>(in), {}};
}

std::string status_of(const std::string& verdict) {
  return verdict == "accept" ? "0" : verdict == "reject" ? "1" : "2";
}

}  // namespace

int main(int argc, char** argv) {
  if (argc < 3 || argc > 4) {
    std::fputs("usage: demo_check RESULT.json TRUTH.json [STATUS]\n", stderr);
    return static_cast<int>(halfmark::ExitStatus::usage);
  }
  try {
    const std::string truth = text_of(argv[2]);
    std::string differences = halfmark::compare_with_truth(text_of(argv[1]), truth);
    const std::string expected = status_of(nlohmann::json::parse(truth).at("verdict"));
    if (argc == 4 && expected != argv[3])
      differences += "inspect ended with status " + std::string(argv[3]) + " instead of " + expected + "\n";
    if (differences.empty()) {
      std::puts("as the truth file says: every verdict and value agrees");
      return 0;
    }
    std::fputs(("not as the truth file says:\n" + differences).c_str(), stdout);
    return 1;
  } catch (const halfmark::Problem& problem) {
    std::fprintf(stderr, "demo_check: %s\n", problem.what());
    return static_cast<int>(problem.status());
  } catch (const std::exception& error) {
    std::fprintf(stderr, "demo_check: %s\n", error.what());
    return static_cast<int>(halfmark::ExitStatus::internal);
  }
}
