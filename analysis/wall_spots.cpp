// From thicknesses at the vertices to what a drawing asks for: the least wall, as the mean over a patch; the
// distribution; the thin places.
//
// A patch is the surface within a circle's radius of its centre, on the centre's side of the wall (normals
// less than 60 degrees apart). It counts if at least four fifths of it are wall. Where patches are wide,
// centres are tried a third of a radius apart and then, about the thinnest ones, at every vertex.
#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>
#include <numeric>

#include "analysis/mesh_smoothing.h"
#include "analysis/wall_patches.h"
#include "analysis/wall_thickness.h"

namespace halfmark {

namespace {

constexpr std::array<double, 6> shown_percentiles{1, 5, 25, 50, 75, 95};
// The share of the walls that is shown as thin places where no limit is given.
constexpr double thinnest_percent = 10;

bool counts(const WallMap& walls, const std::vector<std::uint8_t>& in_zone, std::size_t v) {
  return walls.is_wall[v] != 0 && (in_zone.empty() || in_zone[v] != 0);
}

// Thickness and area of the walls in the zone, thinnest first.
struct Sorted {
  std::vector<std::uint32_t> order;
  double area = 0;
};

Sorted sorted_walls(const WallMap& walls, const std::vector<float>& areas,
                    const std::vector<std::uint8_t>& in_zone) {
  Sorted out;
  for (std::uint32_t v = 0; v < areas.size(); ++v) {
    if (!counts(walls, in_zone, v)) continue;
    out.order.push_back(v);
    out.area += areas[v];
  }
  std::sort(out.order.begin(), out.order.end(), [&](std::uint32_t a, std::uint32_t b) {
    const float ta = walls.thickness_mm[a], tb = walls.thickness_mm[b];
    return ta < tb || (ta == tb && a < b);
  });
  return out;
}

double percentile(const Sorted& sorted, const WallMap& walls, const std::vector<float>& areas,
                  double percent) {
  if (sorted.order.empty()) return 0;
  const double wanted = sorted.area * percent / 100;
  double passed = 0;
  for (const std::uint32_t v : sorted.order) {
    passed += areas[v];
    if (passed >= wanted) return walls.thickness_mm[v];
  }
  return walls.thickness_mm[sorted.order.back()];
}

double mean_below_cap(const Sorted& sorted, const WallMap& walls, const std::vector<float>& areas) {
  double sum = 0, area = 0;
  for (const std::uint32_t v : sorted.order) {
    if (walls.at_cap[v] != 0) continue;
    sum += areas[v] * static_cast<double>(walls.thickness_mm[v]);
    area += areas[v];
  }
  if (area > 0) return sum / area;
  return sorted.order.empty() ? 0 : walls.thickness_mm[sorted.order.back()];
}

struct ThinPlaces {
  std::vector<std::uint32_t> of_vertex;  // number of the place from 1, by first vertex; 0: none
  std::vector<WallSpot> spots;           // area and least thickness
  std::vector<std::uint32_t> thinnest;   // vertex of each place
};

// Connected places of wall vertices thinner than below_mm.
ThinPlaces thin_places(const WallMap& walls, const std::vector<std::uint8_t>& in_zone,
                       const std::vector<float>& areas, const VertexNeighbours& neighbours, double below_mm) {
  ThinPlaces out;
  out.of_vertex.assign(walls.is_wall.size(), 0);
  const auto thin = [&](std::size_t v) {
    return out.of_vertex[v] == 0 && counts(walls, in_zone, v) && walls.thickness_mm[v] < below_mm;
  };
  std::vector<std::uint32_t> open;
  for (std::uint32_t first = 0; first < out.of_vertex.size(); ++first) {
    if (!thin(first)) continue;
    const auto number = static_cast<std::uint32_t>(out.spots.size() + 1);
    WallSpot spot;
    std::uint32_t thinnest = first;
    out.of_vertex[first] = number;
    open.push_back(first);
    while (!open.empty()) {
      const std::uint32_t v = open.back();
      open.pop_back();
      spot.area_mm2 += areas[v];
      const float a = walls.thickness_mm[v], b = walls.thickness_mm[thinnest];
      if (a < b || (a == b && v < thinnest)) thinnest = v;
      for (const std::uint32_t n : neighbours.of(v)) {
        if (!thin(n)) continue;
        out.of_vertex[n] = number;
        open.push_back(n);
      }
    }
    spot.least_mm = walls.thickness_mm[thinnest];
    spot.patch_mean_mm = std::numeric_limits<double>::infinity();
    out.spots.push_back(spot);
    out.thinnest.push_back(thinnest);
  }
  return out;
}

// The places with the thinnest of their patches, thinnest first. A place whose patches all reach the limit is
// noise, not a thin wall.
std::vector<WallSpot> thin_spots(const TriangleMesh& mesh, ThinPlaces places,
                                 const std::vector<Patch>& patches, double below_mm, int max_spots) {
  std::vector<WallSpot>& spots = places.spots;
  for (const Patch& patch : patches) {
    const std::uint32_t number = places.of_vertex[patch.centre];
    if (number == 0 || patch.mean_mm >= spots[number - 1].patch_mean_mm) continue;
    spots[number - 1].patch_mean_mm = patch.mean_mm;
    const auto& p = mesh.vertices_mm[patch.centre];
    spots[number - 1].position_mm = {p[0], p[1], p[2]};
  }
  std::erase_if(spots, [&](const WallSpot& spot) { return !(spot.patch_mean_mm < below_mm); });
  std::stable_sort(spots.begin(), spots.end(),
                   [](const WallSpot& a, const WallSpot& b) { return a.patch_mean_mm < b.patch_mean_mm; });
  spots.resize(std::min(spots.size(), static_cast<std::size_t>(std::max(max_spots, 0))));
  return spots;
}

}  // namespace

WallSummary summarise_walls(const TriangleMesh& mesh, const WallMap& walls, const WallSpec& options,
                            const std::vector<std::uint8_t>& in_zone, double spot_below_mm, int max_spots) {
  WallSummary summary;
  const std::vector<float> areas = vertex_areas_mm2(mesh);
  const Sorted sorted = sorted_walls(walls, areas, in_zone);
  if (sorted.order.empty()) return summary;
  summary.mean_mm = mean_below_cap(sorted, walls, areas);
  for (const double p : shown_percentiles)
    summary.percentiles.emplace_back(p, percentile(sorted, walls, areas, p));

  const double below = spot_below_mm > 0 ? spot_below_mm : percentile(sorted, walls, areas, thinnest_percent);
  ThinPlaces places = thin_places(walls, in_zone, areas, VertexNeighbours(mesh), below);
  const std::vector<Patch> patches =
      wall_patches(mesh, walls, areas, in_zone, options.patch_mm2, places.thinnest);
  const auto least = std::min_element(patches.begin(), patches.end(),
                                      [](const Patch& a, const Patch& b) { return a.mean_mm < b.mean_mm; });
  if (least == patches.end()) return summary;
  summary.any_wall = true;
  summary.least_mm.value = least->mean_mm;
  summary.least_mm.standard_uncertainty = walls.standard_uncertainty_mm;
  summary.least_mm.contributions = walls.contributions;
  const auto& p = mesh.vertices_mm[least->centre];
  summary.least_position_mm = {p[0], p[1], p[2]};
  summary.spots = thin_spots(mesh, std::move(places), patches, below, max_spots);
  return summary;
}

double wall_percentile(const TriangleMesh& mesh, const WallMap& walls,
                       const std::vector<std::uint8_t>& in_zone, double percent) {
  const std::vector<float> areas = vertex_areas_mm2(mesh);
  return percentile(sorted_walls(walls, areas, in_zone), walls, areas, percent);
}

}  // namespace halfmark
