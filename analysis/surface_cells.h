// The triangles of one cell of eight voxels, for each of the 256 patterns of inside and outside.
#pragma once

#include <array>
#include <cstdint>

namespace halfmark {

// Corner c of a cell lies at (c & 1, c >> 1 & 1, c >> 2 & 1). An edge is named by its corner with the lower
// index and its axis: 3 * corner + axis.
struct CellTriangles {
  std::uint8_t count = 0;
  std::array<std::array<std::uint8_t, 3>, 5> edges{};  // counter-clockwise seen from the outside
};

// Index: bit c is set where corner c is inside.
//
// The patterns are made from the faces, not listed: on each face the crossed edges are joined by segments,
// the segments close to loops, each loop becomes a fan. A face whose inside corners lie across from each
// other is read one way only, as joined through the face (material is 26-connected, air 6-connected), and no
// triangle's inner edge lies in a face; so the triangles of neighbouring cells meet in every pattern and the
// surface is closed.
const std::array<CellTriangles, 256>& cell_triangles();

}  // namespace halfmark
