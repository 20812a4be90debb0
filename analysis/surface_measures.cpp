// Area and volume of a triangle mesh. Triangles are summed in blocks of fixed size and the blocks in order,
// so that the sum has the same bits whatever the number of threads.
#include <tbb/parallel_for.h>

#include <algorithm>

#include "analysis/surface.h"

namespace halfmark {

namespace {

constexpr std::size_t block_triangles = 4096;

template <class F>
double sum_over_triangles(const TriangleMesh& mesh, F&& term) {
  const std::size_t blocks = (mesh.triangles.size() + block_triangles - 1) / block_triangles;
  std::vector<double> sums(blocks, 0.0);
  tbb::parallel_for(std::size_t{0}, blocks, [&](std::size_t b) {
    const std::size_t end = std::min((b + 1) * block_triangles, mesh.triangles.size());
    double sum = 0;
    for (std::size_t t = b * block_triangles; t < end; ++t) {
      std::array<Vec3, 3> corner;
      for (std::size_t c = 0; c < 3; ++c) {
        const auto& v = mesh.vertices_mm[mesh.triangles[t][c]];
        corner[c] = {v[0], v[1], v[2]};
      }
      sum += term(corner);
    }
    sums[b] = sum;
  });
  double total = 0;
  for (const double s : sums) total += s;
  return total;
}

}  // namespace

double surface_area_mm2(const TriangleMesh& mesh) {
  return sum_over_triangles(
      mesh, [](const std::array<Vec3, 3>& c) { return 0.5 * length(cross(c[1] - c[0], c[2] - c[0])); });
}

double enclosed_volume_mm3(const TriangleMesh& mesh) {
  if (mesh.vertices_mm.empty()) return 0;
  // Taken about a point of the mesh: far from the origin the terms would cancel badly.
  const auto& v = mesh.vertices_mm.front();
  const Vec3 about{v[0], v[1], v[2]};
  return sum_over_triangles(mesh, [&](const std::array<Vec3, 3>& c) {
    return dot(c[0] - about, cross(c[1] - about, c[2] - about)) / 6;
  });
}

}  // namespace halfmark
