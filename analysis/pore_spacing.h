// How near pores lie to each other and to the part's surface: gaps between the surfaces of label voxels,
// moved by each pore's own surface shift (see pore_shape.h). Voxel gaps are those of run_grid.h: exact along
// an axis, up to 0.5 voxel too small towards a slanting plane.
#pragma once

#include <cstdint>
#include <vector>

#include "analysis/part_map.h"
#include "analysis/pore_segmentation.h"
#include "io/run_control.h"

namespace halfmark {

struct PoreGap {
  std::int32_t id_a = 0, id_b = 0;  // id_a < id_b
  double gap_mm = 0;                // >= 0
};

// True for what counts as a pore's neighbour: all but inclusions and diffuse regions.
bool counts_as_neighbour(PoreKind kind);

// Fills spacing_mm and nearest_id of every pore but the diffuse ones.
// surface_shift_mm: by pore (id - 1), how far the label's surface lies outside the true one.
void measure_spacing(SegmentedPores& found, const VolumeGeometry& geometry,
                     const std::vector<double>& surface_shift_mm, const RunControl& control = {});

// Fills depth_mm: 0 for open pores, none where the part has no outside. The surface is that of
// PartMap::inside; what lies beyond the volume is no outside.
void measure_depth(SegmentedPores& found, const VolumeGeometry& geometry, const PartMap& part,
                   const std::vector<double>& surface_shift_mm, const RunControl& control = {});

// All pairs of neighbours, ordered by id, whose gap is at most the smaller of their reaches. reach_mm: by
// pore (id - 1); below zero: the pore is left out. Pores must have been described.
std::vector<PoreGap> gaps_between_pores(const SegmentedPores& found, const VolumeGeometry& geometry,
                                        const std::vector<double>& reach_mm, const RunControl& control = {});

}  // namespace halfmark
