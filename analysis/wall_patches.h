// Means of the wall thickness over patches of the surface; see wall_spots.cpp for what a patch is.
#pragma once

#include <cstdint>
#include <vector>

#include "analysis/wall_thickness.h"

namespace halfmark {

struct Patch {
  std::uint32_t centre = 0;  // vertex
  double mean_mm = 0;        // area-weighted over its wall vertices in the zone
};

// Patches of patch_mm2 (a circle's area) that are at least four fifths wall, by rising centre. areas: of each
// vertex, mm^2. in_zone: per vertex, empty for all; what lies outside is no part of a patch. also_at:
// vertices to be tried as centres beside those chosen. Where no patch has room (a wall lower than a patch is
// wide) all count that hold a wall.
std::vector<Patch> wall_patches(const TriangleMesh& mesh, const WallMap& walls,
                                const std::vector<float>& areas_mm2, const std::vector<std::uint8_t>& in_zone,
                                double patch_mm2, const std::vector<std::uint32_t>& also_at = {});

}  // namespace halfmark
