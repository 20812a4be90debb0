#include "analysis/run_mask.h"

#include <algorithm>

namespace halfmark {

bool contains(const RunMask& mask, std::int64_t x, std::int64_t y, std::int64_t z) {
  const auto& size = mask.size();
  if (y < 0 || z < 0 || y >= size[1] || z >= size[2]) return false;
  const auto row = mask.row(y, z);
  const auto after = std::upper_bound(row.begin(), row.end(), x,
                                      [](std::int64_t value, const Run& run) { return value < run.begin; });
  return after != row.begin() && x < std::prev(after)->end;
}

}  // namespace halfmark
