// The shape class of a pore by published rules on its calipers and its sphericity.
//
// With a, b, c = length, width, thickness and the Wadell sphericity:
//   unclassified  the shape is not resolved: see shape_class's arguments
//   flat          c/b < 2/3 (the disc and blade of Zingg, "Beitrag zur Schotteranalyse", 1935) and c/a < 0.5
//                 (platy and bladed rather than compact: Sneed & Folk, J. Geology 66, 1958, p. 119)
//   round         b/a > 2/3 and c/b > 2/3 (the sphere of Zingg 1935) and sphericity >= 0.806 (that of a cube:
//                 Wadell, J. Geology 43, 1935): gas pores
//   irregular     all others: rods, branched and rough voids such as shrinkage
#pragma once

#include "analysis/calipers.h"
#include "analysis/pores.h"

namespace halfmark {

constexpr double zingg_ratio = 2.0 / 3;
constexpr double flat_ratio = 0.5;
constexpr double round_sphericity = 0.806;
// Blur widths (sigma, voxel averaging included) that a pore's equivalent diameter must span: below, blur
// makes every pore round.
constexpr double resolved_blur_widths = 4;

// sphericity: not_measured leaves the pore unclassified.
ShapeClass shape_class(const Calipers& calipers, double sphericity, double equivalent_diameter_mm,
                       double blur_mm);

}  // namespace halfmark
