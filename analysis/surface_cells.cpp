// Cells of eight samples: Lorensen & Cline 1987. Their table can leave holes where two cells read the face
// between them differently; this one reads each face by itself (as in Bloomenthal 1988), which cannot.
#include "analysis/surface_cells.h"

#include <vector>

namespace halfmark {

namespace {

using Face = std::array<int, 4>;  // corners, counter-clockwise seen from outside the cell

std::array<Face, 6> cell_faces() {
  std::array<Face, 6> faces{};
  for (int axis = 0; axis < 3; ++axis) {
    const int u = 1 << ((axis + 1) % 3), v = 1 << ((axis + 2) % 3), far = 1 << axis;
    faces[static_cast<std::size_t>(2 * axis)] = {0, v, u | v, u};
    faces[static_cast<std::size_t>(2 * axis + 1)] = {far, far | u, far | u | v, far | v};
  }
  return faces;
}

int edge_between(int a, int b) {
  const int bit = a ^ b;
  return 3 * (a & b) + (bit == 1 ? 0 : bit == 2 ? 1 : 2);
}

bool on_face(const Face& face, int edge) {
  for (std::size_t i = 0; i < 4; ++i) {
    if (edge_between(face[i], face[(i + 1) % 4]) == edge) return true;
  }
  return false;
}

// next[edge]: the edge that follows it in its loop, or -1. A crossed edge lies in two faces; it starts a
// segment in one of them and ends one in the other.
std::array<int, 24> next_edges(unsigned pattern, const std::array<Face, 6>& faces) {
  std::array<int, 24> next;
  next.fill(-1);
  for (const Face& face : faces) {
    const auto inside = [&](std::size_t i) { return (pattern >> face[i % 4] & 1U) != 0; };
    for (std::size_t i = 0; i < 4; ++i) {
      if (!inside(i) || inside(i + 1)) continue;
      // From inside to outside across edge i; the outside ends where the face's border comes back inside.
      std::size_t j = i + 1;
      while (!inside(j + 1)) ++j;
      const int leaving = edge_between(face[i % 4], face[(i + 1) % 4]);
      const int entering = edge_between(face[j % 4], face[(j + 1) % 4]);
      next[static_cast<std::size_t>(entering)] = leaving;
    }
  }
  return next;
}

bool share_a_face(int a, int b, const std::array<Face, 6>& faces) {
  for (const Face& face : faces) {
    if (on_face(face, a) && on_face(face, b)) return true;
  }
  return false;
}

// True if no inner edge of the fan about loop[start] lies in a face of the cell.
bool fan_is_clear(const std::vector<int>& loop, std::size_t start, const std::array<Face, 6>& faces) {
  for (std::size_t k = 2; k + 1 < loop.size(); ++k) {
    if (share_a_face(loop[start], loop[(start + k) % loop.size()], faces)) return false;
  }
  return true;
}

void add_fan(CellTriangles& cell, const std::vector<int>& loop, const std::array<Face, 6>& faces) {
  std::size_t start = 0;
  while (start + 1 < loop.size() && !fan_is_clear(loop, start, faces)) ++start;
  for (std::size_t k = 1; k + 1 < loop.size(); ++k) {
    const auto at = [&](std::size_t i) { return static_cast<std::uint8_t>(loop[(start + i) % loop.size()]); };
    cell.edges[cell.count++] = {at(0), at(k), at(k + 1)};
  }
}

std::array<CellTriangles, 256> make_cells() {
  const std::array<Face, 6> faces = cell_faces();
  std::array<CellTriangles, 256> cells{};
  for (unsigned pattern = 0; pattern < 256; ++pattern) {
    std::array<int, 24> next = next_edges(pattern, faces);
    for (std::size_t first = 0; first < next.size(); ++first) {
      std::vector<int> loop;
      for (int edge = static_cast<int>(first); next[static_cast<std::size_t>(edge)] >= 0;) {
        loop.push_back(edge);
        const int following = next[static_cast<std::size_t>(edge)];
        next[static_cast<std::size_t>(edge)] = -1;
        edge = following;
      }
      if (!loop.empty()) add_fan(cells[pattern], loop, faces);
    }
  }
  return cells;
}

}  // namespace

const std::array<CellTriangles, 256>& cell_triangles() {
  static const std::array<CellTriangles, 256> cells = make_cells();
  return cells;
}

}  // namespace halfmark
