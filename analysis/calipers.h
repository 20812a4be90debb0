// Caliper (Feret) diameters of a body given by surface points: the distances of two parallel planes that just
// hold it.
//
//   length     the largest caliper over all directions
//   width      the largest caliper across the length's direction
//   thickness  the smallest caliper over all directions
//
// so that length >= width >= thickness. The points come from pore_outline.h.
#pragma once

#include <span>

#include "io/vec3.h"

namespace halfmark {

struct Calipers {
  double length = 0, width = 0, thickness = 0;                              // in the points' unit
  Vec3 length_axis{1, 0, 0}, width_axis{0, 1, 0}, thickness_axis{0, 0, 1};  // unit vectors
};

// Directions are those of a geodesic grid, the best ones then refined. At least two different points; fewer
// have calipers of zero.
Calipers measure_calipers(std::span<const Vec3> points);

}  // namespace halfmark
