// The ISO-50 surface of the part as triangles, vertices on voxel edges where the grey values of a blurred edge
// cross the level (edge_crossing.h), ordered by (z, y, x, edge). Area and volume from it.
#pragma once

#include "analysis/grey_levels.h"
#include "analysis/part_map.h"
#include "io/triangle_mesh.h"

namespace halfmark {

struct SurfaceOptions {
  bool fill_pores =
      false;  // true: only the part's own outer surface, pores filled (walls are measured on it)
  // Open at the field's border when false; closed there when true, by flat caps half a voxel beyond the last
  // voxel centres (volume needs a closed surface; walls an open one).
  bool close_at_border = true;
};

TriangleMesh extract_surface(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
                             const PartMap& part, const SurfaceOptions& options = {},
                             const RunControl& control = {});

double surface_area_mm2(const TriangleMesh& mesh);
double enclosed_volume_mm3(const TriangleMesh& mesh);  // divergence theorem; the mesh must be closed

}  // namespace halfmark
