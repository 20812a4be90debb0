// Iso-lines of a grid by marching squares: where a bilinear picture crosses a level, to a fraction of a
// voxel.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

namespace halfmark {

using Segment = std::array<float, 4>;  // x0, y0, x1, y1 in grid units; sample (i, j) lies at (i, j)

// values: width x height, x fastest. Saddles are cut by the mean of the four corners. NaN counts as below.
std::vector<Segment> contour(const std::vector<float>& values, std::int64_t width, std::int64_t height,
                             float level);

}  // namespace halfmark
