// Taubin, G.: A signal processing approach to fair surface design. SIGGRAPH 1995.
#include "analysis/mesh_smoothing.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>

namespace halfmark {

namespace {

// Taubin's factors: a step towards the neighbours' mean, a somewhat larger one away from it. Waves with
// eigenvalue below 1/0.5 - 1/0.53 = 0.11 pass.
constexpr float shrinking = 0.5F, growing = -0.53F;
constexpr std::size_t block = 8192;

template <class F>
void for_blocks(std::size_t count, F&& f) {
  tbb::parallel_for(std::size_t{0}, (count + block - 1) / block, [&](std::size_t b) {
    for (std::size_t i = b * block; i < std::min((b + 1) * block, count); ++i) f(i);
  });
}

void step(const Points& from, Points& to, const VertexNeighbours& neighbours, float factor) {
  for_blocks(from.size(), [&](std::size_t v) {
    const auto near = neighbours.of(v);
    std::array<float, 3> sum{0, 0, 0};
    for (const std::uint32_t n : near) {
      for (std::size_t a = 0; a < 3; ++a) sum[a] += from[n][a] - from[v][a];
    }
    const float share = near.empty() ? 0.0F : factor / static_cast<float>(near.size());
    for (std::size_t a = 0; a < 3; ++a) to[v][a] = from[v][a] + share * sum[a];
  });
}

std::array<float, 3> area_vector(const Points& p, const std::array<std::uint32_t, 3>& t) {
  std::array<float, 3> u, v;
  for (std::size_t a = 0; a < 3; ++a) {
    u[a] = p[t[1]][a] - p[t[0]][a];
    v[a] = p[t[2]][a] - p[t[0]][a];
  }
  return {0.5F * (u[1] * v[2] - u[2] * v[1]), 0.5F * (u[2] * v[0] - u[0] * v[2]),
          0.5F * (u[0] * v[1] - u[1] * v[0])};
}

void make_unit(std::array<float, 3>& n) {
  const float length = std::sqrt(n[0] * n[0] + n[1] * n[1] + n[2] * n[2]);
  for (float& c : n) c = length > 0 ? c / length : 0;
}

}  // namespace

VertexNeighbours::VertexNeighbours(const TriangleMesh& mesh) {
  begin_.assign(mesh.vertices_mm.size() + 1, 0);
  for (const auto& t : mesh.triangles) {
    for (const std::uint32_t v : t) ++begin_[v + 1];
  }
  for (std::size_t v = 1; v < begin_.size(); ++v) begin_[v] += begin_[v - 1];
  ends_.resize(begin_.back());
  std::vector<std::size_t> next(begin_.begin(), begin_.end() - 1);
  for (const auto& t : mesh.triangles) {
    for (std::size_t c = 0; c < 3; ++c) ends_[next[t[c]]++] = t[(c + 1) % 3];
  }
}

Points smoothed_vertices(const TriangleMesh& mesh, const VertexNeighbours& neighbours, int pairs,
                         const RunControl& control) {
  Points here = mesh.vertices_mm, next(here.size());
  for (int i = 0; i < pairs; ++i) {
    control.throw_if_cancelled();
    step(here, next, neighbours, shrinking);
    step(next, here, neighbours, growing);
  }
  return here;
}

Points vertex_normals(const Points& vertices, const TriangleMesh& mesh) {
  Points normals(vertices.size(), {0, 0, 0});
  for (const auto& t : mesh.triangles) {
    const std::array<float, 3> area = area_vector(vertices, t);
    for (const std::uint32_t v : t) {
      for (std::size_t a = 0; a < 3; ++a) normals[v][a] += area[a];
    }
  }
  for_blocks(normals.size(), [&](std::size_t v) { make_unit(normals[v]); });
  return normals;
}

Points averaged_normals(Points normals, const VertexNeighbours& neighbours, int passes) {
  Points next(normals.size());
  for (int i = 0; i < passes; ++i) {
    for_blocks(normals.size(), [&](std::size_t v) {
      next[v] = normals[v];
      for (const std::uint32_t n : neighbours.of(v)) {
        for (std::size_t a = 0; a < 3; ++a) next[v][a] += normals[n][a];
      }
      make_unit(next[v]);
    });
    std::swap(normals, next);
  }
  return normals;
}

std::vector<float> vertex_areas_mm2(const TriangleMesh& mesh) {
  std::vector<float> areas(mesh.vertices_mm.size(), 0);
  for (const auto& t : mesh.triangles) {
    const std::array<float, 3> v = area_vector(mesh.vertices_mm, t);
    const float third = std::sqrt(v[0] * v[0] + v[1] * v[1] + v[2] * v[2]) / 3;
    for (const std::uint32_t corner : t) areas[corner] += third;
  }
  return areas;
}

}  // namespace halfmark
