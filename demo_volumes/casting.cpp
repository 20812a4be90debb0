// A casting of any size for speed and memory: a block with a bore and a pocket that fills about half of a
// cube of edge_voxels, 1 % of it gas pores of 3 to 30 voxels.
#include <algorithm>
#include <cmath>
#include <numbers>

#include "demo_volumes/part_builder.h"
#include "demo_volumes/parts.h"

namespace halfmark {

namespace {

constexpr double porosity_share = 0.01;
constexpr double smallest_voxels = 3, largest_voxels = 30;
constexpr double gap_voxels = 4;              // least material between two pores, and to the surface
constexpr int most_failures_in_a_row = 4000;  // then the part is taken to be full

struct Pore {
  Vec3 centre_mm;
  double radius_mm;
};

// Places pores of log-uniform sizes until their volume is reached, none nearer than the gap to another.
std::vector<Pore> scattered_pores(const Solid& body, double volume_mm3, double edge_mm, double voxel_mm) {
  // A pore may not be wider than a tenth of the cube, or small cubes would hold one pore only.
  const double largest = std::min(largest_voxels * voxel_mm, 0.1 * edge_mm);
  const double smallest = smallest_voxels * voxel_mm, gap = gap_voxels * voxel_mm;
  const double cell = largest + gap;  // neighbours that may touch lie in adjacent cells
  const auto cells = static_cast<std::size_t>(std::ceil(edge_mm / cell));
  std::vector<std::vector<Pore>> grid(cells * cells * cells);
  const auto cell_index = [&](double mm) {
    return std::min(static_cast<std::size_t>(std::max(mm, 0.0) / cell), cells - 1);
  };
  DemoRandom random(512);
  std::vector<Pore> pores;
  double placed_mm3 = 0;
  int failures = 0;
  double radius = 0;
  while (placed_mm3 < volume_mm3 && failures < most_failures_in_a_row) {
    if (failures == 0) radius = 0.5 * smallest * std::pow(largest / smallest, random());
    const Vec3 p{random(0, edge_mm), random(0, edge_mm), random(0, edge_mm)};
    bool free = body.signed_distance_mm(p) < -(radius + gap);
    const std::array<std::size_t, 3> at{cell_index(p[0]), cell_index(p[1]), cell_index(p[2])};
    const auto low = [](std::size_t i) { return i > 0 ? i - 1 : i; };
    const auto high = [&](std::size_t i) { return std::min(i + 1, cells - 1); };
    for (std::size_t z = low(at[2]); free && z <= high(at[2]); ++z) {
      for (std::size_t y = low(at[1]); free && y <= high(at[1]); ++y) {
        for (std::size_t x = low(at[0]); free && x <= high(at[0]); ++x) {
          for (const Pore& other : grid[(z * cells + y) * cells + x])
            free = free && length(other.centre_mm - p) > other.radius_mm + radius + gap;
        }
      }
    }
    failures = free ? 0 : failures + 1;
    if (!free) continue;
    pores.push_back({p, radius});
    grid[(at[2] * cells + at[1]) * cells + at[0]].push_back(pores.back());
    placed_mm3 += 4.0 / 3.0 * std::numbers::pi * radius * radius * radius;
  }
  return pores;
}

}  // namespace

DemoPart casting_part(const DemoOptions& options) {
  constexpr double voxel = 0.1;
  const double edge = voxel * static_cast<double>(options.edge_voxels);
  const auto at = [&](double x, double y, double z) { return Vec3{edge * x, edge * y, edge * z}; };
  const SolidPtr block = box(at(0.07, 0.07, 0.1), at(0.93, 0.93, 0.9));
  const SolidPtr bore = cylinder(at(0.36, 0.38, 0), at(0.36, 0.38, 1), 0.13 * edge);
  const SolidPtr pocket = box(at(0.62, 0.3, 0.55), at(0.84, 0.8, 1));
  const SolidPtr body = subtracted(block, {bore, pocket});

  PartBuilder part("casting", demo_geometry({edge, edge, edge}, 1), {0.3, 0.8, 1}, 2);
  part.body(body);
  for (const Pore& pore : scattered_pores(*body, porosity_share * part.enclosed_volume_mm3(), edge, voxel))
    part.gas_pore(pore.centre_mm, 2 * pore.radius_mm);

  const Json spec = Json::parse(R"({
    "spec_version": 1,
    "title": "Casting: porosity",
    "part": { "name": "casting", "drawing": "HM-5120", "revision": "A", "material": "cast aluminium" },
    "requirements": [
      { "id": "R1", "zone": "part", "quantity": "porosity", "max": 0.5 }
    ],
    "decision": { "rule": "guarded", "coverage_factor": 2 }
  })");
  part.expect("R1", "reject", part.porosity_percent(), 0.05, "%",
              "porosity is " + in_words(part.porosity_percent(), 2, "%") + ", at most 0.5 % is allowed");
  return part.finish("reject", spec, everyday_scan(512));
}

}  // namespace halfmark
