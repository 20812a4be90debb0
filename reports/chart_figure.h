// Charts: how large the pores are, and the grey values with the levels that were read off them.
#pragma once

#include <vector>

#include "analysis/inspection_result.h"
#include "reports/picture.h"

namespace halfmark {

struct SizeClass {
  double from_mm = 0, to_mm = 0;
  std::int64_t count = 0;
  double volume_mm3 = 0;
};
// Pores (not inclusions) by equivalent diameter in ten classes a decade, the steps of the preferred numbers
// R10 (ISO 3), from the smallest to the largest that occur, at least ten.
std::vector<SizeClass> size_classes(const std::vector<Pore>& pores);

Figure pore_size_figure(const Inspection& inspection);       // empty without pores
Figure grey_histogram_figure(const Inspection& inspection);  // empty without a histogram

}  // namespace halfmark
