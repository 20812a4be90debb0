// Completes segmented pores: calipers, surface area, sphericity, shape class, depth, spacing. The parts are
// pore_outline.h and calipers.h (length, width, thickness), crofton_area.h, shape_class.h and pore_spacing.h.
//
// Labels are grown to half of a pore's own peak, so blur makes those of small pores larger than the pore and
// those of middling pores smaller, while the volume comes from the summed grey deficit. All lengths and areas
// are therefore moved to the surface parallel to the label's that holds the pore's volume: with calipers
// a, b, c of the label and a shift h inwards, (a - 2h)(b - 2h)(c - 2h) / (abc) = volume / label volume. For a
// sphere this is the scaling by the cube root of the volumes; a thin disc loses thickness, not length.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/pore_segmentation.h"
#include "io/run_control.h"

namespace halfmark {

// Fewer label voxels than a ball of radius 2 has (33): Crofton's area is low by more than 4 % there and the
// sphericity says nothing. Area, sphericity and shape class are left empty.
constexpr std::int64_t least_area_voxels = 33;

// Fills shape, length, width, thickness, surface area, sphericity, depth and spacing of every pore. Pores
// must be numbered as in the field: pores[i].id == i + 1. Diffuse and in-between regions keep their label's
// own calipers, since their volume is no measure of their extent; diffuse ones have no area, sphericity or
// class. Depends on neither the number of threads nor the order of work.
void describe_pores(SegmentedPores& found, const VolumeGeometry& geometry, const PartMap& part,
                    const GreyLevels& levels, const RunControl& control = {});

// How far the label's surface lies outside the described pore's, mm; negative where the label is smaller.
double surface_shift_of(const Pore& pore, double label_volume_mm3);

// Crofton estimate of the surface of a voxel set, 13 directions with weights for the given spacing (Lehmann &
// Legland 2012), mm^2. occupied: size voxels, x fastest, non-zero is inside; what lies beyond is outside.
double crofton_area_mm2(const std::vector<std::uint8_t>& occupied, const std::array<std::int64_t, 3>& size,
                        const Vec3& spacing_mm);
// Wadell sphericity pi^(1/3) (6 V)^(2/3) / A (Wadell 1935).
double wadell_sphericity(double volume, double area);

}  // namespace halfmark
