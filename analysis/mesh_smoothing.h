// What a surface made from noisy voxels needs before lengths are taken on it: who neighbours whom, a low-pass
// filter that does not shrink, normals and the area each vertex stands for.
#pragma once

#include <array>
#include <cstdint>
#include <span>
#include <vector>

#include "io/run_control.h"
#include "io/triangle_mesh.h"

namespace halfmark {

// For each vertex the ends of the edges that leave it (each neighbour once; at an open border one may miss).
class VertexNeighbours {
 public:
  explicit VertexNeighbours(const TriangleMesh& mesh);
  std::span<const std::uint32_t> of(std::size_t vertex) const {
    return {ends_.data() + begin_[vertex], begin_[vertex + 1] - begin_[vertex]};
  }
  std::size_t vertices() const { return begin_.size() - 1; }

 private:
  std::vector<std::size_t> begin_;
  std::vector<std::uint32_t> ends_;
};

using Points = std::vector<std::array<float, 3>>;

// Taubin's low-pass filter (1995): `pairs` of a shrinking and a growing step; waves of the surface longer
// than about 8 edges pass, noise from vertex to vertex goes, curved faces keep their place.
Points smoothed_vertices(const TriangleMesh& mesh, const VertexNeighbours& neighbours, int pairs,
                         const RunControl& control = {});

// Unit normals at the vertices, outwards, weighted by triangle area; {0, 0, 0} where there is no triangle.
Points vertex_normals(const Points& vertices, const TriangleMesh& mesh);

// Each normal averaged with its neighbours', `passes` times over; unit length.
Points averaged_normals(Points normals, const VertexNeighbours& neighbours, int passes);

// A third of the area of the triangles about each vertex, mm^2; the sum over all is the mesh's area.
std::vector<float> vertex_areas_mm2(const TriangleMesh& mesh);

}  // namespace halfmark
