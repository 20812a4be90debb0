// Label voxels become closed triangle meshes, one a pore, for pictures and for pores.vtp.
//
// Naive surface nets on the label voxels (one corner in each cell of 2 x 2 x 2 voxels that the surface
// passes, as in S. F. Frisken Gibson, "Constrained elastic surface nets", MICCAI 1998), relaxed a little
// within their cells. Closed: each edge belongs to an even number of triangles (four where voxels touch along
// an edge only). The meshes show place and shape; volumes come from the pore table.
#pragma once

#include <cstdint>
#include <vector>

#include "analysis/run_mask.h"
#include "io/triangle_mesh.h"
#include "io/volume_geometry.h"

namespace halfmark {

class PoreMesher {
 public:
  PoreMesher(const RunLabels& labels, const VolumeGeometry& geometry);
  // Empty for a label without voxels. Memory: a few planes of the pore's bounding box besides the mesh.
  TriangleMesh mesh_of(std::int32_t label) const;

 private:
  struct Piece {
    std::int32_t label, x_begin, x_end, y, z;
  };
  VolumeGeometry geometry_;
  std::vector<Piece> pieces_;  // by label, then z, y, x
};

void append(TriangleMesh& mesh, const TriangleMesh& more);

}  // namespace halfmark
