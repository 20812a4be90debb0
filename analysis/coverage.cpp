#include "analysis/coverage.h"

#include <algorithm>
#include <cmath>

namespace halfmark {

namespace {

// A cell's edge is halved at most this often: an edge or corner of a solid is then followed to 1/16 voxel.
constexpr int cell_divisions = 4;
// Cells are divided while the surface turns by more than this angle (radian, about) across them. The plane's
// offset is corrected for curvature, what is left grows with the fourth power of this.
constexpr double largest_bend = 0.25;
// The gradient of a distance has length 1; a shorter one means that an edge passes through the cell.
constexpr double least_gradient = 0.97;
// Slopes below this share of the largest one are raised to it: the cut's formula divides by them.
constexpr double least_slope = 1e-4;

// Share of the unit cube [-1/2, 1/2]^3 where offset + slope . u < 0: the cube's volume below a plane by
// inclusion and exclusion of its corners (the zonotope formula, as in volume-of-fluid methods: Scardovelli &
// Zaleski, J. Comput. Phys. 164 (2000) 228).
double share_below_plane(double offset, const Vec3& slope) {
  Vec3 m{std::abs(slope[0]), std::abs(slope[1]), std::abs(slope[2])};
  const double floor = std::max(least_slope * std::max({m[0], m[1], m[2]}), 1e-300);
  for (double& value : m) value = std::max(value, floor);
  const double all = m[0] + m[1] + m[2];
  double depth = 0.5 * all - offset;  // from the cube's lowest corner to the plane, in units of the slope
  if (depth <= 0) return 0;
  if (depth >= all) return 1;
  const bool upper = depth > 0.5 * all;  // the formula cancels least below the middle
  if (upper) depth = all - depth;
  const auto cubed = [](double v) { return v > 0 ? v * v * v : 0.0; };
  double volume = cubed(depth);
  for (const double value : m) volume -= cubed(depth - value);
  volume += cubed(depth - m[0] - m[1]) + cubed(depth - m[0] - m[2]) + cubed(depth - m[1] - m[2]);
  volume /= 6 * m[0] * m[1] * m[2];
  return std::clamp(upper ? 1 - volume : volume, 0.0, 1.0);
}

struct Cell {
  std::array<Vec3, 3> edge;
  std::array<double, 3> edge_mm;
  double half_diagonal_mm;
};

Cell cell_of(const std::array<Vec3, 3>& edges) {
  Cell cell{edges, {length(edges[0]), length(edges[1]), length(edges[2])}, 0};
  cell.half_diagonal_mm = 0.5 * length({cell.edge_mm[0], cell.edge_mm[1], cell.edge_mm[2]});
  return cell;
}

Cell halved(const Cell& cell) {
  Cell out = cell;
  for (std::size_t a = 0; a < 3; ++a) {
    out.edge[a] = 0.5 * cell.edge[a];
    out.edge_mm[a] = 0.5 * cell.edge_mm[a];
  }
  out.half_diagonal_mm = 0.5 * cell.half_diagonal_mm;
  return out;
}

double coverage(const Solid& solid, const Vec3& centre, double distance, const Cell& cell, int divisions) {
  Vec3 slope;
  double gradient2 = 0, second = 0, bend = 0;
  for (std::size_t a = 0; a < 3; ++a) {
    const Vec3 half = 0.5 * cell.edge[a];
    const double after = solid.signed_distance_mm(centre + half),
                 before = solid.signed_distance_mm(centre - half);
    slope[a] = after - before;
    const double difference = after + before - 2 * distance;
    second += difference;
    bend += 4 * std::abs(difference) / cell.edge_mm[a];
    gradient2 += slope[a] * slope[a] / (cell.edge_mm[a] * cell.edge_mm[a]);
  }
  if (divisions > 0 && (bend > largest_bend || gradient2 < least_gradient * least_gradient)) {
    const Cell part = halved(cell);
    double sum = 0;
    for (int corner = 0; corner < 8; ++corner) {
      Vec3 p = centre;
      for (std::size_t a = 0; a < 3; ++a) p = p + (((corner >> a) & 1) != 0 ? 0.5 : -0.5) * part.edge[a];
      const double d = solid.signed_distance_mm(p);
      if (std::abs(d) >= part.half_diagonal_mm) {
        sum += d < 0 ? 1 : 0;
      } else {
        sum += coverage(solid, p, d, part, divisions - 1);
      }
    }
    return sum / 8;
  }
  // The distance's mean over the cell: by Simpson's weights the second differences count a sixth.
  return share_below_plane(distance + second / 6, slope);
}

}  // namespace

double cell_coverage(const Solid& solid, const Vec3& centre_mm, const std::array<Vec3, 3>& edges_mm) {
  const Cell cell = cell_of(edges_mm);
  const double d = solid.signed_distance_mm(centre_mm);
  if (std::abs(d) >= cell.half_diagonal_mm) return d < 0 ? 1 : 0;
  return coverage(solid, centre_mm, d, cell, cell_divisions);
}

VoxelReach voxel_reach(const SolidBounds& bounds, const VolumeGeometry& geometry) {
  Vec3 low{1e300, 1e300, 1e300}, high{-1e300, -1e300, -1e300};
  for (std::size_t corner = 0; corner < 8; ++corner) {
    Vec3 c;
    for (std::size_t a = 0; a < 3; ++a) c[a] = ((corner >> a) & 1) != 0 ? bounds.max_mm[a] : bounds.min_mm[a];
    const Vec3 index = geometry.mm_to_index(c);
    for (std::size_t a = 0; a < 3; ++a) {
      low[a] = std::min(low[a], index[a]);
      high[a] = std::max(high[a], index[a]);
    }
  }
  VoxelReach reach;
  for (std::size_t a = 0; a < 3; ++a) {
    const auto size = static_cast<double>(geometry.size[a]);
    reach.begin[a] = static_cast<std::int64_t>(std::clamp(std::floor(low[a]), 0.0, size));
    reach.end[a] = static_cast<std::int64_t>(std::clamp(std::ceil(high[a]) + 1, 0.0, size));
  }
  return reach;
}

void cover_row(const Solid& solid, const VoxelReach& reach, const VolumeGeometry& geometry, std::int64_t y,
               std::int64_t z, float body_share, std::vector<float>& shares) {
  const Vec3 origin = geometry.index_to_mm({0, 0, 0});
  const Vec3 first = geometry.index_to_mm({0, static_cast<double>(y), static_cast<double>(z)});
  const Cell cell =
      cell_of({geometry.index_to_mm({1, 0, 0}) - origin, geometry.index_to_mm({0, 1, 0}) - origin,
               geometry.index_to_mm({0, 0, 1}) - origin});
  for (std::int64_t x = reach.begin[0]; x < reach.end[0];) {
    const Vec3 centre = first + static_cast<double>(x) * cell.edge[0];
    const double d = solid.signed_distance_mm(centre);
    if (std::abs(d) >= cell.half_diagonal_mm) {
      const double clear = (std::abs(d) - cell.half_diagonal_mm) / cell.edge_mm[0];
      const std::int64_t next = x + 1 + static_cast<std::int64_t>(std::min(clear, 1e9) * (1 - 1e-9));
      const std::int64_t stop = std::min(next, reach.end[0]);
      if (d < 0) std::fill(shares.begin() + x, shares.begin() + stop, body_share);
      x = stop;
      continue;
    }
    const auto c = static_cast<float>(coverage(solid, centre, d, cell, cell_divisions));
    float& share = shares[static_cast<std::size_t>(x)];
    share = (1 - c) * share + c * body_share;
    ++x;
  }
}

}  // namespace halfmark
