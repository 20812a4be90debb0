#include "analysis/crofton_area.h"

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <numbers>
#include <vector>

#include "analysis/pore_shape.h"

namespace halfmark {

namespace {

using Polygon = std::vector<Vec3>;  // corners on the plane that touches the unit sphere at the cell's centre

// Half width of the first square on the touching plane. Cells end well below 90 degrees from their centre:
// 50 is 88.9 degrees.
constexpr double first_square = 50;

// The part of the polygon where dot(corner, normal) >= 0.
Polygon clipped(const Polygon& polygon, const Vec3& normal) {
  Polygon out;
  for (std::size_t i = 0; i < polygon.size(); ++i) {
    const Vec3& a = polygon[i];
    const Vec3& b = polygon[(i + 1) % polygon.size()];
    const double da = dot(a, normal), db = dot(b, normal);
    if (da >= 0) out.push_back(a);
    if ((da >= 0) != (db >= 0)) out.push_back(a + (da / (da - db)) * (b - a));
  }
  return out;
}

// Solid angle of a triangle seen from the origin (Van Oosterom & Strackee 1983).
double solid_angle(const Vec3& a, const Vec3& b, const Vec3& c) {
  const double la = length(a), lb = length(b), lc = length(c);
  const double volume = dot(a, cross(b, c));
  const double below = la * lb * lc + dot(a, b) * lc + dot(a, c) * lb + dot(b, c) * la;
  return 2 * std::atan2(std::abs(volume), below);
}

// Solid angle of the directions nearer to `centre` than to any of `others` (unit vectors).
double cell_area(const Vec3& centre, const std::vector<Vec3>& others) {
  const auto [across_u, across_v] = across(centre);
  const Vec3 u = first_square * across_u, v = first_square * across_v;
  Polygon polygon{centre + u + v, centre - u + v, centre - u - v, centre + u - v};
  for (const Vec3& other : others) {
    const Vec3 normal = centre - other;
    if (dot(normal, normal) > 1e-20) polygon = clipped(polygon, normal);
  }
  double area = 0;
  for (std::size_t k = 1; k + 1 < polygon.size(); ++k) {
    area += solid_angle(polygon[0], polygon[k], polygon[k + 1]);
  }
  return area;
}

// Voxels of `row` whose neighbour at +dx lies in `other`, both ordered by x.
std::int64_t shifted_overlap(std::span<const VoxelRun> row, std::span<const VoxelRun> other, int dx) {
  std::int64_t n = 0;
  std::size_t i = 0, j = 0;
  while (i < row.size() && j < other.size()) {
    const std::int32_t begin = std::max(row[i].begin, other[j].begin - dx);
    const std::int32_t end = std::min(row[i].end, other[j].end - dx);
    if (end > begin) n += end - begin;
    if (row[i].end < other[j].end - dx) {
      ++i;
    } else {
      ++j;
    }
  }
  return n;
}

// The rows of a pore: starts of equal (y, z) in its runs.
std::vector<std::span<const VoxelRun>> rows_of(std::span<const VoxelRun> runs) {
  std::vector<std::span<const VoxelRun>> rows;
  std::size_t begin = 0;
  for (std::size_t i = 1; i <= runs.size(); ++i) {
    if (i < runs.size() && runs[i].y == runs[begin].y && runs[i].z == runs[begin].z) continue;
    rows.push_back(runs.subspan(begin, i - begin));
    begin = i;
  }
  return rows;
}

bool before(const VoxelRun& run, std::int32_t y, std::int32_t z) {
  return run.z != z ? run.z < z : run.y < y;
}

}  // namespace

std::array<CroftonDirection, 13> crofton_directions(const Vec3& spacing_mm) {
  // In the order of the row they lead to: the same row, then rows (y+1, z), (y-1, z+1), (y, z+1), (y+1, z+1).
  constexpr std::array<std::array<int, 3>, 13> steps{{{1, 0, 0},
                                                      {-1, 1, 0},
                                                      {0, 1, 0},
                                                      {1, 1, 0},
                                                      {-1, -1, 1},
                                                      {0, -1, 1},
                                                      {1, -1, 1},
                                                      {-1, 0, 1},
                                                      {0, 0, 1},
                                                      {1, 0, 1},
                                                      {-1, 1, 1},
                                                      {0, 1, 1},
                                                      {1, 1, 1}}};
  std::array<CroftonDirection, 13> directions;
  std::vector<Vec3> all;
  for (std::size_t i = 0; i < steps.size(); ++i) {
    const auto& s = steps[i];
    const Vec3 mm{s[0] * spacing_mm[0], s[1] * spacing_mm[1], s[2] * spacing_mm[2]};
    directions[i].step = s;
    directions[i].length_mm = length(mm);
    all.push_back(unit(mm));
    all.push_back(-1.0 * unit(mm));
  }
  for (std::size_t i = 0; i < directions.size(); ++i) {
    directions[i].weight = cell_area(all[2 * i], all) / (2 * std::numbers::pi);
  }
  return directions;
}

double crofton_area_mm2(std::span<const VoxelRun> runs, const std::array<CroftonDirection, 13>& directions,
                        double voxel_volume_mm3) {
  const auto rows = rows_of(runs);
  const std::int64_t voxels = voxel_count(runs);
  std::array<std::int64_t, 13> kept{};  // voxels whose neighbour along the direction is in the set as well
  std::array<std::size_t, 13> at{};     // the row reached from the present one; only grows
  for (const auto& row : rows) {
    for (std::size_t d = 0; d < directions.size(); ++d) {
      const auto& step = directions[d].step;
      const std::int32_t y = row[0].y + step[1], z = row[0].z + step[2];
      std::size_t& k = at[d];
      while (k < rows.size() && before(rows[k][0], y, z)) ++k;
      if (k < rows.size() && rows[k][0].y == y && rows[k][0].z == z) {
        kept[d] += shifted_overlap(row, rows[k], step[0]);
      }
    }
  }
  // Lehmann & Legland, eq. 8: entries per line direction times the line density, weighted.
  double area = 0;
  for (std::size_t d = 0; d < directions.size(); ++d) {
    area += 4 * directions[d].weight * static_cast<double>(voxels - kept[d]) * voxel_volume_mm3 /
            directions[d].length_mm;
  }
  return area;
}

double crofton_area_mm2(const std::vector<std::uint8_t>& occupied, const std::array<std::int64_t, 3>& size,
                        const Vec3& spacing_mm) {
  std::vector<VoxelRun> runs;
  std::size_t i = 0;
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      bool open = false;
      for (std::int64_t x = 0; x < size[0]; ++x, ++i) {
        const auto at = static_cast<std::int32_t>(x);
        if (occupied[i] == 0) {
          open = false;
        } else if (open) {
          runs.back().end = at + 1;
        } else {
          runs.push_back({at, at + 1, static_cast<std::int32_t>(y), static_cast<std::int32_t>(z)});
          open = true;
        }
      }
    }
  }
  return crofton_area_mm2(runs, crofton_directions(spacing_mm),
                          spacing_mm[0] * spacing_mm[1] * spacing_mm[2]);
}

}  // namespace halfmark
