// The real volumes that lie beside the project; absent ones skip a test with a word.
#pragma once

#include <filesystem>

namespace halfmark {

// Tests run from the project's root.
inline std::filesystem::path real_volume(const char* name) {
  return std::filesystem::path("../shared/real_volumes") / name;
}

}  // namespace halfmark
