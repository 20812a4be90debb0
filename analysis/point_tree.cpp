#include "analysis/point_tree.h"

#include <tbb/parallel_invoke.h>

#include <algorithm>

namespace halfmark {

namespace {

constexpr std::size_t parallel_points = 20000;  // below this a thread of its own does not pay

std::uint8_t widest_axis(const std::vector<std::array<float, 3>>& points, const std::uint32_t* first,
                         const std::uint32_t* last) {
  std::array<float, 3> low = points[*first], high = low;
  for (const std::uint32_t* m = first; m != last; ++m) {
    for (std::size_t a = 0; a < 3; ++a) {
      low[a] = std::min(low[a], points[*m][a]);
      high[a] = std::max(high[a], points[*m][a]);
    }
  }
  std::uint8_t axis = 0;
  for (std::uint8_t a = 1; a < 3; ++a) {
    if (high[a] - low[a] > high[axis] - low[axis]) axis = a;
  }
  return axis;
}

}  // namespace

PointTree::PointTree(const std::vector<std::array<float, 3>>& points, std::vector<std::uint32_t> members)
    : members_(std::move(members)) {
  std::size_t nodes = 1;
  for (std::size_t n = members_.size(); n > leaf_points; n = (n + 1) / 2) nodes = 2 * nodes + 1;
  nodes_.resize(nodes);
  if (!members_.empty()) build(points, 0, 0, members_.size());
  points_.reserve(members_.size());
  for (const std::uint32_t m : members_) points_.push_back(points[m]);
}

void PointTree::build(const std::vector<std::array<float, 3>>& points, std::size_t node, std::size_t begin,
                      std::size_t end) {
  if (end - begin <= leaf_points) return;
  const std::size_t middle = begin + (end - begin) / 2;
  std::uint32_t* const m = members_.data();
  const std::uint8_t axis = widest_axis(points, m + begin, m + end);
  std::nth_element(m + begin, m + middle, m + end, [&](std::uint32_t a, std::uint32_t b) {
    const float pa = points[a][axis], pb = points[b][axis];
    return pa < pb || (pa == pb && a < b);
  });
  nodes_[node] = {points[m[middle]][axis], axis};
  const auto low = [&] { build(points, 2 * node + 1, begin, middle); };
  const auto high = [&] { build(points, 2 * node + 2, middle, end); };
  if (end - begin > parallel_points) {
    tbb::parallel_invoke(low, high);
  } else {
    low();
    high();
  }
}

}  // namespace halfmark
