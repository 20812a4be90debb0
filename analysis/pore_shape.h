// Completes segmented pores: calipers, surface area, sphericity, shape class, depth, spacing.
#pragma once

#include "analysis/pore_segmentation.h"

namespace halfmark {

// Fills shape, length, width, thickness, surface area, sphericity, depth and spacing of every pore.
void describe_pores(SegmentedPores& found, const VolumeGeometry& geometry, const PartMap& part,
                    const GreyLevels& levels, const RunControl& control = {});

// Crofton estimate of the surface of a voxel set, 13 directions with weights for the given spacing (Lehmann &
// Legland 2012), mm^2. occupied: size voxels, x fastest, non-zero is inside; what lies beyond is outside.
double crofton_area_mm2(const std::vector<std::uint8_t>& occupied, const std::array<std::int64_t, 3>& size,
                        const Vec3& spacing_mm);
// Wadell sphericity pi^(1/3) (6 V)^(2/3) / A (Wadell 1935).
double wadell_sphericity(double volume, double area);

}  // namespace halfmark
