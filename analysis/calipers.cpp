#include "analysis/calipers.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <cstring>
#include <map>
#include <numbers>
#include <utility>
#include <vector>

#include "analysis/wide_registers.h"

namespace halfmark {

namespace {

// Icosahedron, each triangle split in four this many times: 321 axes, neighbours about 7 degrees apart.
constexpr int grid_splits = 3;
// Axes of the grid from which the search goes on: the best one may lie beside the highest of several peaks.
constexpr std::size_t starts = 3;
constexpr double first_turn = 0.07, last_turn = 0.002;  // radians: half a grid cell down to 0.1 degrees
constexpr std::size_t turns_across = 32;  // directions tried across the length, 5.6 degrees apart

// Axes are tried eight at a time: their running extremes then stay in registers.
constexpr std::size_t batch = 8;
struct Batch {
  std::array<float, batch> x{}, y{}, z{};
  void set(std::size_t i, const Vec3& axis) {
    x[i] = static_cast<float>(axis[0]);
    y[i] = static_cast<float>(axis[1]);
    z[i] = static_cast<float>(axis[2]);
  }
};

struct Grid {
  std::vector<Vec3> axes;
  std::vector<Batch> batches;  // the same; the last one is filled up with axes of length 0
};

// GCC's and Clang's vector type: one register, or two where the machine has none so wide.
typedef float Eight __attribute__((vector_size(batch * sizeof(float))));

// Calipers of the points x, y, z along eight axes. Elementwise, so that every clone gives the same bits.
HALFMARK_FOR_WIDE_REGISTERS
void batch_calipers(const float* x, const float* y, const float* z, std::size_t count, const Batch& axes,
                    float* out) {
  Eight ax, ay, az;
  std::memcpy(&ax, axes.x.data(), sizeof ax);
  std::memcpy(&ay, axes.y.data(), sizeof ay);
  std::memcpy(&az, axes.z.data(), sizeof az);
  Eight low = x[0] * ax + y[0] * ay + z[0] * az, high = low;
  for (std::size_t p = 1; p < count; ++p) {
    const Eight t = x[p] * ax + y[p] * ay + z[p] * az;
    low = t < low ? t : low;
    high = t > high ? t : high;
  }
  const Eight calipers = high - low;
  std::memcpy(out, &calipers, sizeof calipers);
}

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
  double nearest = 2;
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
    if (grid.axes.size() % batch == 0) grid.batches.emplace_back();
    grid.batches.back().set(grid.axes.size() % batch, p);
    grid.axes.push_back(p);
  }
  return grid;
}

const Grid& grid() {
  static const Grid g = make_grid();
  return g;
}

class Hull {
 public:
  explicit Hull(std::span<const Vec3> points) : points_(points) {
    for (const Vec3& p : points) {
      const Vec3 from_first = p - points[0];
      x_.push_back(static_cast<float>(from_first[0]));
      y_.push_back(static_cast<float>(from_first[1]));
      z_.push_back(static_cast<float>(from_first[2]));
    }
  }

  std::array<float, batch> calipers(const Batch& axes) const {
    std::array<float, batch> out;
    batch_calipers(x_.data(), y_.data(), z_.data(), x_.size(), axes, out.data());
    return out;
  }
  // Of every axis of the grid.
  std::vector<float> grid_calipers() const {
    std::vector<float> all;
    for (const Batch& axes : grid().batches) {
      const auto some = calipers(axes);
      all.insert(all.end(), some.begin(), some.end());
    }
    all.resize(grid().axes.size());
    return all;
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
  std::vector<float> x_, y_, z_;  // from the first point
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
  float value = static_cast<float>(hull.caliper(axis));
  for (double turn = first_turn; turn > last_turn;) {
    const auto [u, v] = across(axis);
    std::array<Vec3, batch> next;
    Batch axes;
    for (std::size_t k = 0; k < batch; ++k) {
      const double angle = static_cast<double>(k) * 2 * std::numbers::pi / batch;
      next[k] = unit(axis + turn * (std::cos(angle) * u + std::sin(angle) * v));
      axes.set(k, next[k]);
    }
    const auto there = hull.calipers(axes);
    const auto best = std::min_element(there.begin(), there.end());
    if (*best < value) {
      value = *best;
      axis = next[static_cast<std::size_t>(best - there.begin())];
    } else {
      turn /= 2;
    }
  }
  return axis;
}

// The largest caliper across `along`: a coarse turn, then the fixed point in the plane across.
Vec3 widest_across(const Hull& hull, const Vec3& along) {
  const auto [u, v] = across(along);
  Vec3 axis = u;
  float most = 0;
  for (std::size_t first = 0; first < turns_across; first += batch) {
    std::array<Vec3, batch> next;
    Batch axes;
    for (std::size_t k = 0; k < batch; ++k) {
      const double angle = static_cast<double>(first + k) * std::numbers::pi / turns_across;
      next[k] = std::cos(angle) * u + std::sin(angle) * v;
      axes.set(k, next[k]);
    }
    const auto there = hull.calipers(axes);
    const auto best = std::max_element(there.begin(), there.end());
    if (*best > most) {
      most = *best;
      axis = next[static_cast<std::size_t>(best - there.begin())];
    }
  }
  double value = hull.caliper(axis);
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
  std::vector<float> scan = hull.grid_calipers();
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
