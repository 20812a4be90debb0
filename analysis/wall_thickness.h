// Wall thickness by the largest inscribed sphere that covers a place (Hildebrand & Rueegsegger 1997), on
// distances to the sub-voxel surface. Places whose sphere touches two sides at least 120 degrees apart are
// walls; edges and corners are not. Measure on a surface that is open at the field's border: what is cut
// there is no wall.
#pragma once

#include <string>
#include <vector>

#include "analysis/measured.h"
#include "analysis/part_map.h"
#include "io/inspection_spec.h"
#include "io/run_control.h"
#include "io/triangle_mesh.h"

namespace halfmark {

struct WallMap {
  // Per vertex of the mesh it was measured on.
  std::vector<float> thickness_mm;          // capped at WallSpec::max_mm
  std::vector<std::uint8_t> is_wall;        // 1: touches two sides >= 120 degrees apart
  std::vector<std::uint8_t> at_cap;         // 1: the wall is max_mm or more
  double standard_uncertainty_mm = 0;       // of one place's thickness
  std::vector<Contribution> contributions;  // that it is made of, mm
  std::vector<std::string> warnings;
};

struct WallSpot {            // a connected thin place
  Vec3 position_mm{};        // of its thinnest patch, on the surface
  double patch_mean_mm = 0;  // mean over patch_mm2 there
  double least_mm = 0;       // thinnest single vertex
  double area_mm2 = 0;       // of the spot
};

struct WallSummary {
  bool any_wall = false;
  Measured least_mm;         // least patch mean
  Vec3 least_position_mm{};  // the centre of that patch, on the surface
  double mean_mm = 0;        // area-weighted over walls below the cap
  std::vector<std::pair<double, double>>
      percentiles;              // (percent, mm), area-weighted over all walls: 1, 5, 25, 50, 75, 95
  std::vector<WallSpot> spots;  // thinnest first, at most max_spots
};

WallMap measure_walls(const TriangleMesh& mesh, const VolumeGeometry& geometry, const PartMap& part,
                      const GreyLevels& levels, const WallSpec& options, const RunControl& control = {});

// in_zone: per vertex, empty for all. Spots are connected places thinner than spot_below_mm (the limit; <= 0:
// the thinnest tenth by area).
WallSummary summarise_walls(const TriangleMesh& mesh, const WallMap& walls, const WallSpec& options,
                            const std::vector<std::uint8_t>& in_zone, double spot_below_mm,
                            int max_spots = 50);
// Area-weighted percentile of the thickness over walls in the zone, mm.
double wall_percentile(const TriangleMesh& mesh, const WallMap& walls,
                       const std::vector<std::uint8_t>& in_zone, double percent);

}  // namespace halfmark
