#include "analysis/pore_outline.h"

#include <algorithm>
#include <array>
#include <cstddef>
#include <functional>

#include "analysis/pores.h"

namespace halfmark {

namespace {

// Each pass adds a variance of half a voxel squared. One leaves the largest caliper of a digitised ball of 20
// voxels 0.5 voxel too long, two 0.3, three 0.25; more rounds off what is really there.
constexpr int smoothing_passes = 2;
// Voxels around the label's box: one for the neighbours that may hold the surface, one a pass that lines of
// the grid may spoil by smoothing across their ends.
constexpr std::int32_t margin = 1 + smoothing_passes;

class Box {
 public:
  explicit Box(std::span<const VoxelRun> label) {
    std::array<std::int32_t, 3> high;
    low_ = {label[0].begin, label[0].y, label[0].z};
    high = low_;
    for (const VoxelRun& r : label) {
      low_ = {std::min(low_[0], r.begin), std::min(low_[1], r.y), std::min(low_[2], r.z)};
      high = {std::max(high[0], r.end - 1), std::max(high[1], r.y), std::max(high[2], r.z)};
    }
    for (std::size_t k = 0; k < 3; ++k) {
      low_[k] -= margin;
      size_[k] = high[k] - low_[k] + 1 + margin;
    }
  }

  std::int64_t voxels() const { return std::int64_t{size_[0]} * size_[1] * size_[2]; }
  const std::array<std::int32_t, 3>& low() const { return low_; }
  const std::array<std::int32_t, 3>& size() const { return size_; }
  std::array<std::ptrdiff_t, 3> strides() const {
    return {1, size_[0], static_cast<std::ptrdiff_t>(size_[0]) * size_[1]};
  }
  std::size_t index(std::int32_t x, std::int32_t y, std::int32_t z) const {
    const std::int64_t row = std::int64_t{z - low_[2]} * size_[1] + (y - low_[1]);
    return static_cast<std::size_t>(row * size_[0] + (x - low_[0]));
  }
  // The part of the run inside the box, if any.
  bool clip(VoxelRun& r) const {
    if (r.y < low_[1] || r.y >= low_[1] + size_[1] || r.z < low_[2] || r.z >= low_[2] + size_[2])
      return false;
    r.begin = std::max(r.begin, low_[0]);
    r.end = std::min(r.end, low_[0] + size_[0]);
    return r.begin < r.end;
  }

 private:
  std::array<std::int32_t, 3> low_{}, size_{};
};

std::vector<float> shares_in(const Box& box, std::span<const VoxelRun> label,
                             std::span<const ShareRun> shares) {
  std::vector<float> grid(static_cast<std::size_t>(box.voxels()), 0.0F);
  if (shares.empty()) {
    for (const VoxelRun& r : label) {
      std::fill_n(grid.begin() + static_cast<std::ptrdiff_t>(box.index(r.begin, r.y, r.z)), r.end - r.begin,
                  1.0F);
    }
    return grid;
  }
  for (const ShareRun& s : shares) {
    VoxelRun r = s.voxels;
    if (!box.clip(r)) continue;
    const std::int16_t* share = s.share + (r.begin - s.voxels.begin);
    float* out = grid.data() + box.index(r.begin, r.y, r.z);
    for (std::int32_t x = r.begin; x < r.end; ++x) {
      *out++ = static_cast<float>(*share++) * (1.0F / PoreField::unit);
    }
  }
  return grid;
}

// (1 2 1)/4 along one axis.
void smooth(std::vector<float>& grid, std::ptrdiff_t stride) {
  std::vector<float> out(grid.size(), 0.0F);
  const auto n = static_cast<std::ptrdiff_t>(grid.size());
  const float* in = grid.data();
  for (std::ptrdiff_t i = stride; i < n - stride; ++i) {
    out[static_cast<std::size_t>(i)] = 0.25F * (in[i - stride] + in[i + stride]) + 0.5F * in[i];
  }
  grid.swap(out);
}

// The level that as many voxels exceed as the label has. Only voxels of the label and next to it count.
float level_of(const std::vector<float>& grid, const std::vector<std::uint8_t>& near, std::int64_t voxels) {
  std::vector<float> values;
  for (std::size_t i = 0; i < grid.size(); ++i) {
    if (near[i] != 0) values.push_back(grid[i]);
  }
  const auto nth = values.begin() + (voxels - 1);
  std::nth_element(values.begin(), nth, values.end(), std::greater<>());
  if (nth + 1 == values.end()) return *nth / 2;
  return (*nth + *std::max_element(nth + 1, values.end())) / 2;
}

// Label voxels and their 26 neighbours.
std::vector<std::uint8_t> near_label(const Box& box, std::span<const VoxelRun> label) {
  std::vector<std::uint8_t> near(static_cast<std::size_t>(box.voxels()), 0);
  for (const VoxelRun& r : label) {
    for (std::int32_t z = r.z - 1; z <= r.z + 1; ++z) {
      for (std::int32_t y = r.y - 1; y <= r.y + 1; ++y) {
        std::fill_n(near.begin() + static_cast<std::ptrdiff_t>(box.index(r.begin - 1, y, z)),
                    r.end - r.begin + 2, std::uint8_t{1});
      }
    }
  }
  return near;
}

// Where the values along a line first rise to the level and last fall below it, as fractional indices.
struct Crossings {
  bool any = false;
  float first = 0, last = 0;
};

Crossings crossings(const float* line, std::ptrdiff_t stride, std::int32_t count, float level) {
  std::int32_t i = 1, j = count - 2;
  while (i <= j && line[i * stride] < level) ++i;
  if (i > j) return {};
  while (line[j * stride] < level) --j;
  const float before = line[(i - 1) * stride], at = line[i * stride];
  const float end = line[j * stride], after = line[(j + 1) * stride];
  return {true, static_cast<float>(i) - (at - level) / (at - before),
          static_cast<float>(j) + (end - level) / (end - after)};
}

// Appends the corners of the hull of points that differ along axes a and b only (Andrew 1979).
void add_plane_hull(std::vector<Vec3>& plane, std::size_t a, std::size_t b, std::vector<Vec3>& out) {
  std::sort(plane.begin(), plane.end(),
            [&](const Vec3& p, const Vec3& q) { return p[a] != q[a] ? p[a] < q[a] : p[b] < q[b]; });
  if (plane.size() < 3) {
    out.insert(out.end(), plane.begin(), plane.end());
    return;
  }
  const auto turns_left = [&](const Vec3& p, const Vec3& q, const Vec3& r) {
    return (q[a] - p[a]) * (r[b] - p[b]) - (q[b] - p[b]) * (r[a] - p[a]) > 0;
  };
  const auto add = [&](const Vec3& p, std::size_t fixed) {
    while (out.size() > fixed + 1 && !turns_left(out[out.size() - 2], out.back(), p)) out.pop_back();
    out.push_back(p);
  };
  const std::size_t lower = out.size();
  for (const Vec3& p : plane) add(p, lower);
  const std::size_t upper = out.size() - 1;
  for (std::size_t i = plane.size() - 1; i-- > 0;) add(plane[i], upper);
  out.pop_back();
}

class Outline {
 public:
  Outline(const Box& box, const std::vector<float>& grid, float level, const Vec3& spacing_mm)
      : box_(box), grid_(grid), level_(level), spacing_(spacing_mm) {}

  std::vector<Vec3> points() {
    const auto& n = box_.size();
    for (std::int32_t z = 1; z + 1 < n[2]; ++z) {
      for (std::int32_t y = 1; y + 1 < n[1]; ++y) add_line(0, {0, y, z});
      for (std::int32_t x = 1; x + 1 < n[0]; ++x) add_line(1, {x, 0, z});
      close_plane(0, 1);
    }
    for (std::int32_t y = 1; y + 1 < n[1]; ++y) {
      for (std::int32_t x = 1; x + 1 < n[0]; ++x) add_line(2, {x, y, 0});
      close_plane(0, 2);
    }
    return std::move(points_);
  }

 private:
  void add_line(std::size_t axis, const std::array<std::int32_t, 3>& from) {
    const auto strides = box_.strides();
    const float* line = grid_.data() + from[0] * strides[0] + from[1] * strides[1] + from[2] * strides[2];
    const Crossings c = crossings(line, strides[axis], box_.size()[axis], level_);
    if (!c.any) return;
    for (const float at : {c.first, c.last}) {
      Vec3 p;
      for (std::size_t k = 0; k < 3; ++k) {
        p[k] = spacing_[k] * (box_.low()[k] + (k == axis ? static_cast<double>(at) : from[k]));
      }
      plane_.push_back(p);
    }
  }
  void close_plane(std::size_t a, std::size_t b) {
    add_plane_hull(plane_, a, b, points_);
    plane_.clear();
  }

  const Box& box_;
  const std::vector<float>& grid_;
  float level_;
  Vec3 spacing_;
  std::vector<Vec3> plane_, points_;
};

// Centres of the label's voxels at the hull of each plane, appended to `out`.
void add_outer_centres(std::span<const VoxelRun> label, const Vec3& spacing_mm, std::vector<Vec3>& out) {
  std::vector<Vec3> plane;
  for (std::size_t i = 0; i < label.size(); ++i) {
    const VoxelRun& r = label[i];
    plane.push_back({r.begin * spacing_mm[0], r.y * spacing_mm[1], r.z * spacing_mm[2]});
    if (r.end - r.begin > 1) {
      plane.push_back({(r.end - 1) * spacing_mm[0], r.y * spacing_mm[1], r.z * spacing_mm[2]});
    }
    if (i + 1 == label.size() || label[i + 1].z != r.z) {
      add_plane_hull(plane, 0, 1, out);
      plane.clear();
    }
  }
}

// The centres of the six faces of the voxels at the hull of each plane.
std::vector<Vec3> face_centres(std::span<const VoxelRun> label, const Vec3& spacing_mm) {
  std::vector<Vec3> centres, out;
  add_outer_centres(label, spacing_mm, centres);
  for (const Vec3& c : centres) {
    for (std::size_t k = 0; k < 3; ++k) {
      for (const double side : {-0.5, 0.5}) {
        out.push_back(c);
        out.back()[k] += side * spacing_mm[k];
      }
    }
  }
  return out;
}

}  // namespace

std::vector<Vec3> outline_points(std::span<const VoxelRun> label, std::span<const ShareRun> shares,
                                 const Vec3& spacing_mm) {
  const Box box(label);
  if (box.voxels() > outline_box_limit) return face_centres(label, spacing_mm);
  std::vector<float> grid = shares_in(box, label, shares);
  for (int pass = 0; pass < smoothing_passes; ++pass) {
    for (const std::ptrdiff_t stride : box.strides()) smooth(grid, stride);
  }
  const std::vector<std::uint8_t> near = near_label(box, label);
  const float level = level_of(grid, near, voxel_count(label));
  for (std::size_t i = 0; i < grid.size(); ++i) {
    if (near[i] == 0) grid[i] = std::min(grid[i], 0.0F);
  }
  std::vector<Vec3> points = Outline(box, grid, level, spacing_mm).points();
  if (points.empty()) return face_centres(label, spacing_mm);
  add_outer_centres(label, spacing_mm, points);  // threads of one voxel that the smoothing took away
  return points;
}

}  // namespace halfmark
