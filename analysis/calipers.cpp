#include "analysis/calipers.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <cstdlib>
#include <map>
#include <numbers>
#include <utility>
#include <vector>

namespace halfmark {

namespace {

// Icosahedron, each triangle split in four this many times: 321 axes, neighbours about 7 degrees apart.
constexpr int grid_splits = 3;
// Axes of the grid from which the search goes on: the best one may lie beside the highest of several peaks.
constexpr std::size_t starts = 3;
constexpr double first_turn = 0.07, last_turn = 0.002;  // radians: half a grid cell down to 0.1 degrees
constexpr int turns_across = 36;                        // directions tried across the length, 5 degrees apart

struct Grid {
  std::vector<Vec3> axes;
  std::vector<float> x, y, z;  // the same, for the vectorised scan
};

Vec3 unit(const Vec3& v) { return (1 / length(v)) * v; }

// One half of the geodesic grid: of each pair of opposite points the one that comes first along z, y, x.
Grid make_grid() {
  const double g = std::numbers::phi;
  std::vector<Vec3> points;
  for (const double a : {-1.0, 1.0}) {
    for (const double b : {-g, g}) {
      points.push_back(unit({0, a, b}));
      points.push_back(unit({a, b, 0}));
      points.push_back(unit({b, 0, a}));
    }
  }
  std::vector<std::array<std::size_t, 3>> triangles;
  const double edge = length(points[0] - points[6]);
  double nearest = edge;
  for (std::size_t i = 1; i < points.size(); ++i) nearest = std::min(nearest, length(points[0] - points[i]));
  const auto joined = [&](std::size_t i, std::size_t j) {
    return length(points[i] - points[j]) < 1.1 * nearest;
  };
  for (std::size_t i = 0; i < 12; ++i) {
    for (std::size_t j = i + 1; j < 12; ++j) {
      for (std::size_t k = j + 1; k < 12; ++k) {
        if (joined(i, j) && joined(j, k) && joined(i, k)) triangles.push_back({i, j, k});
      }
    }
  }
  for (int split = 0; split < grid_splits; ++split) {
    std::map<std::pair<std::size_t, std::size_t>, std::size_t> middle;
    const auto middle_of = [&](std::size_t i, std::size_t j) {
      const auto [it, fresh] = middle.try_emplace(std::minmax(i, j), points.size());
      if (fresh) points.push_back(unit(points[i] + points[j]));
      return it->second;
    };
    std::vector<std::array<std::size_t, 3>> finer;
    for (const auto& [i, j, k] : triangles) {
      const std::size_t a = middle_of(i, j), b = middle_of(j, k), c = middle_of(i, k);
      finer.insert(finer.end(), {{i, a, c}, {a, j, b}, {c, b, k}, {a, b, c}});
    }
    triangles = std::move(finer);
  }
  Grid grid;
  constexpr double zero = 1e-9;
  for (const Vec3& p : points) {
    const double first = std::abs(p[2]) > zero ? p[2] : std::abs(p[1]) > zero ? p[1] : p[0];
    if (first < 0) continue;
    grid.axes.push_back(p);
    grid.x.push_back(static_cast<float>(p[0]));
    grid.y.push_back(static_cast<float>(p[1]));
    grid.z.push_back(static_cast<float>(p[2]));
  }
  return grid;
}

const Grid& grid() {
  static const Grid g = make_grid();
  return g;
}

class Hull {
 public:
  explicit Hull(std::span<const Vec3> points) : points_(points) {}

  // Caliper of every axis of the grid.
  std::vector<float> scan() const {
    const Grid& g = grid();
    const std::size_t n = g.axes.size();
    std::vector<float> low(n, 1e30F), high(n, -1e30F);
    for (const Vec3& p : points_) {
      const Vec3 from_first = p - points_[0];
      const float x = static_cast<float>(from_first[0]), y = static_cast<float>(from_first[1]),
                  z = static_cast<float>(from_first[2]);
      for (std::size_t i = 0; i < n; ++i) {
        const float t = x * g.x[i] + y * g.y[i] + z * g.z[i];
        low[i] = t < low[i] ? t : low[i];
        high[i] = t > high[i] ? t : high[i];
      }
    }
    for (std::size_t i = 0; i < n; ++i) high[i] -= low[i];
    return high;
  }

  double caliper(const Vec3& axis) const {
    double low = dot(points_[0], axis), high = low;
    for (const Vec3& p : points_) {
      const double t = dot(p, axis);
      low = t < low ? t : low;
      high = t > high ? t : high;
    }
    return high - low;
  }

  // From the point that touches the lower plane to the one that touches the upper.
  Vec3 span(const Vec3& axis) const {
    const Vec3 *low = &points_[0], *high = low;
    double least = dot(*low, axis), most = least;
    for (const Vec3& p : points_) {
      const double t = dot(p, axis);
      if (t < least) low = &p, least = t;
      if (t > most) high = &p, most = t;
    }
    return *high - *low;
  }

 private:
  std::span<const Vec3> points_;
};

// The `starts` axes with the largest value.
std::vector<Vec3> best_axes(std::vector<float> value) {
  std::vector<Vec3> axes;
  for (std::size_t s = 0; s < starts; ++s) {
    const auto best = std::max_element(value.begin(), value.end());
    axes.push_back(grid().axes[static_cast<std::size_t>(best - value.begin())]);
    *best = -1e30F;
  }
  return axes;
}

// Along the line between the touching points the caliper is at least as large: the largest caliper is a fixed
// point of this step.
Vec3 lengthened(const Hull& hull, Vec3 axis) {
  double value = hull.caliper(axis);
  for (;;) {
    const Vec3 next = unit(hull.span(axis));
    const double there = hull.caliper(next);
    if (!(there > value * (1 + 1e-12))) return axis;  // also where the points coincide
    axis = next;
    value = there;
  }
}

// Turns the axis to a least caliper by a search with halving steps.
Vec3 thinned(const Hull& hull, Vec3 axis) {
  double value = hull.caliper(axis);
  for (double turn = first_turn; turn > last_turn;) {
    const Vec3 helper = std::abs(axis[0]) < 0.7 ? Vec3{1, 0, 0} : Vec3{0, 1, 0};
    const Vec3 u = unit(cross(axis, helper)), v = cross(axis, u);
    Vec3 best = axis;
    for (int k = 0; k < 8; ++k) {
      const double angle = k * std::numbers::pi / 4;
      const Vec3 next = unit(axis + turn * (std::cos(angle) * u + std::sin(angle) * v));
      const double there = hull.caliper(next);
      if (there < value) {
        value = there;
        best = next;
      }
    }
    if (best == axis) turn /= 2;
    axis = best;
  }
  return axis;
}

// The largest caliper across `along`: a coarse turn, then the fixed point in the plane across.
Vec3 widest_across(const Hull& hull, const Vec3& along) {
  const Vec3 helper = std::abs(along[0]) < 0.7 ? Vec3{1, 0, 0} : Vec3{0, 1, 0};
  const Vec3 u = unit(cross(along, helper)), v = cross(along, u);
  Vec3 axis = u;
  double value = 0;
  for (int k = 0; k < turns_across; ++k) {
    const double angle = k * std::numbers::pi / turns_across;
    const Vec3 next = std::cos(angle) * u + std::sin(angle) * v;
    const double there = hull.caliper(next);
    if (there > value) {
      value = there;
      axis = next;
    }
  }
  for (;;) {
    const Vec3 span = hull.span(axis);
    const Vec3 next = unit(span - dot(span, along) * along);
    const double there = hull.caliper(next);
    if (!(there > value * (1 + 1e-12))) return axis;  // also where the points coincide
    axis = next;
    value = there;
  }
}

}  // namespace

Calipers measure_calipers(std::span<const Vec3> points) {
  const Hull hull(points);
  std::vector<float> scan = hull.scan();
  Calipers c;
  for (const Vec3& start : best_axes(scan)) {
    const Vec3 axis = lengthened(hull, start);
    const double value = hull.caliper(axis);
    if (value > c.length) c.length = value, c.length_axis = axis;
  }
  c.width_axis = widest_across(hull, c.length_axis);
  c.width = hull.caliper(c.width_axis);
  for (float& value : scan) value = -value;
  c.thickness = c.width;
  c.thickness_axis = c.width_axis;
  for (const Vec3& start : best_axes(scan)) {
    const Vec3 axis = thinned(hull, start);
    const double value = hull.caliper(axis);
    if (value < c.thickness) c.thickness = value, c.thickness_axis = axis;
  }
  return c;
}

}  // namespace halfmark
