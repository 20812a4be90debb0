// A finished picture: PNG bytes, the same for the same input.
#pragma once

#include <string>

namespace halfmark {

struct Picture {
  int width = 0, height = 0;  // pixels
  std::string png;
  bool empty() const { return png.empty(); }
};

struct Figure {
  Picture picture;
  std::string caption;      // a sentence under it
  std::string description;  // for those who cannot see it
};

}  // namespace halfmark
