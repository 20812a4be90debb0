// Standard uncertainty of a pore's volume and diameter from the deficit sum (JCGM 100), by named terms:
//   noise           of the voxels of the window
//   local level     of the material around the pore, as the ring sees it
//   threshold       of air and material level, that is of the contrast the deficit is divided by
//   edge position   what blur, window and level leave at the pore's surface: a shift of it, times its area
//   mouth           of open pores: where the pore ends and the outside begins (pore_mouths.h)
// Noise and local level are each pore's own; threshold and edge position err alike in all pores of a scan.
// Of the voxel size nothing is known here: its uncertainty is not in it.
#pragma once

#include "analysis/grey_levels.h"
#include "analysis/pores.h"

namespace halfmark {

// Standard uncertainty of the place of a pore's surface, in widths of a blurred edge (blur and voxel
// averaging together). Balls of 5 to 15 voxels across come out up to 0.011 voxel too small in radius at
// blur 1.0, 0.03 at blur 1.5 (tests/benchmarks, pore_accuracy), the shrinkage cavity of the demo bracket by
// 0.03 voxel at blur 0.8.
constexpr double edge_error_widths = 0.015;

// Width of a blurred edge, blur and voxel averaging together, voxels.
double edge_width_voxel(const GreyLevels& levels);

// Surface of the sphere of that volume.
double sphere_area(double volume);

// Sets the term of that name, adding it if there is none, and sums up anew: volume and diameter.
void set_volume_term(Pore& pore, const std::string& name, double standard_uncertainty_mm3);

}  // namespace halfmark
