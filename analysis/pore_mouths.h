// Where open pores end and the outside begins: how much of their air no pore's window holds, and how wide
// their mouths are.
#pragma once

#include <vector>

#include "analysis/part_map.h"
#include "analysis/pore_segmentation.h"

namespace halfmark {

struct PoreMouth {
  double area_mm2 = 0;    // voxel faces between the pore's open air and the outside: of a slanting mouth up
                          // to 1.7 times its area
  double unheld_mm3 = 0;  // open air in front of the pore that lies in no pore's window
};

// By pore (id - 1); zero for pores that are not open. Open air that joins several pores counts to each.
std::vector<PoreMouth> pore_mouths(const SegmentedPores& found, const VolumeGeometry& geometry,
                                   const PartMap& part);

// Standard uncertainty of an open pore's volume from its mouth, mm^3. The ball that closes the mouth dips
// into it, the deeper the wider the mouth is at its rim, which blur rounds off; the pore may as well reach up
// to the rim: evenly spread between the two (seen: a neck of 4.4 voxels across loses 3 voxels of its length
// to a ball of 5 voxels radius at blur 0.8).
double mouth_uncertainty_mm3(const PoreMouth& mouth, double closing_radius_mm, double edge_width_mm);

}  // namespace halfmark
