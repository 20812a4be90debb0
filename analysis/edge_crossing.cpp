#include "analysis/edge_crossing.h"

#include <cmath>
#include <numbers>

namespace halfmark {

namespace {

double normal_quantile(double probability) {
  double low = -4, high = 4;
  for (int i = 0; i < 60; ++i) {
    const double middle = 0.5 * (low + high);
    (0.5 * std::erfc(-middle / std::numbers::sqrt2) < probability ? low : high) = middle;
  }
  return 0.5 * (low + high);
}

}  // namespace

EdgeCrossing::EdgeCrossing(double threshold, double contrast)
    : threshold_(threshold), per_contrast_(contrast > 0 ? 1 / contrast : 0) {
  table_.reserve(steps + 1);
  for (int i = 0; i <= steps; ++i) table_.push_back(normal_quantile(lowest + i / steps_per_probability));
}

}  // namespace halfmark
