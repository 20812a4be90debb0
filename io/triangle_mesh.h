// Triangles in mm, corners counter-clockwise seen from outside (the air).
#pragma once

#include <array>
#include <cstdint>
#include <vector>

namespace halfmark {

struct TriangleMesh {
  std::vector<std::array<float, 3>> vertices_mm;
  std::vector<std::array<std::uint32_t, 3>> triangles;
};

}  // namespace halfmark
