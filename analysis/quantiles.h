// Order statistics, of values in any order. They reorder the vector that they are given.
#pragma once

#include <algorithm>
#include <cstddef>
#include <vector>

namespace halfmark {

// The value at place floor(share * (n - 1)); share in [0, 1], at least one value.
template <class T>
double quantile(std::vector<T>& values, double share) {
  const auto at =
      values.begin() + static_cast<std::ptrdiff_t>(share * static_cast<double>(values.size() - 1));
  std::nth_element(values.begin(), at, values.end());
  return static_cast<double>(*at);
}

// Standard deviation of normal noise whose upper side something else raises (pores in a deficit): from the 10
// % and 30 % points, -1.2816 and -0.5244 standard deviations. The mode is nearer to these than to the median
// where pores are many.
template <class T>
double lower_side_deviation(std::vector<T>& values) {
  const double low = quantile(values, 0.1), middle = quantile(values, 0.3);
  return (middle - low) / (1.2816 - 0.5244);
}

}  // namespace halfmark
