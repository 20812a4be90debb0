// A k-d tree over points (Bentley 1975): the nearest one within a reach, or none.
#pragma once

#include <array>
#include <cstdint>
#include <limits>
#include <vector>

namespace halfmark {

class PointTree {
 public:
  static constexpr std::uint32_t none = std::numeric_limits<std::uint32_t>::max();

  PointTree() = default;
  // Of the points whose number is listed in `members`.
  PointTree(const std::vector<std::array<float, 3>>& points, std::vector<std::uint32_t> members);

  // Number of the nearest accepted point closer than `reach` to `at`, else none; of equally near ones the
  // lowest number. accept(number, distance squared) is asked only for points nearer than the best so far.
  template <class Accept>
  std::uint32_t nearest(const std::array<float, 3>& at, float reach, Accept&& accept) const {
    Search search{at, reach * reach, none};
    if (!members_.empty() && reach > 0) visit(0, 0, members_.size(), {0, 0, 0}, search, accept);
    return search.best;
  }
  std::uint32_t nearest(const std::array<float, 3>& at, float reach) const {
    return nearest(at, reach, [](std::uint32_t, float) { return true; });
  }

 private:
  struct Search {
    std::array<float, 3> at;
    float distance2;
    std::uint32_t best;
  };
  struct Node {
    float at = 0;
    std::uint8_t axis = 0;
  };
  static constexpr std::size_t leaf_points = 12;

  void build(const std::vector<std::array<float, 3>>& points, std::size_t node, std::size_t begin,
             std::size_t end);

  // `beyond`: along each axis how far `at` lies outside of the node's box.
  template <class Accept>
  void visit(std::size_t node, std::size_t begin, std::size_t end, std::array<float, 3> beyond,
             Search& search, Accept& accept) const {
    if (end - begin <= leaf_points) {
      for (std::size_t i = begin; i < end; ++i) {
        const float dx = points_[i][0] - search.at[0], dy = points_[i][1] - search.at[1],
                    dz = points_[i][2] - search.at[2];
        const float d2 = dx * dx + dy * dy + dz * dz;
        if (d2 > search.distance2) continue;
        if (d2 == search.distance2 && (search.best == none || members_[i] > search.best)) continue;
        if (!accept(members_[i], d2)) continue;
        search.distance2 = d2;
        search.best = members_[i];
      }
      return;
    }
    const std::size_t middle = begin + (end - begin) / 2;
    const Node& split = nodes_[node];
    const float side = search.at[split.axis] - split.at;
    const bool low_first = side < 0;
    if (low_first) {
      visit(2 * node + 1, begin, middle, beyond, search, accept);
    } else {
      visit(2 * node + 2, middle, end, beyond, search, accept);
    }
    beyond[split.axis] = side;
    if (beyond[0] * beyond[0] + beyond[1] * beyond[1] + beyond[2] * beyond[2] > search.distance2) return;
    if (low_first) {
      visit(2 * node + 2, middle, end, beyond, search, accept);
    } else {
      visit(2 * node + 1, begin, middle, beyond, search, accept);
    }
  }

  std::vector<std::uint32_t> members_;
  std::vector<std::array<float, 3>> points_;  // of the members, in their order
  std::vector<Node> nodes_;
};

}  // namespace halfmark
