// Pass C: from grey values to pores. `local`: smoothed grey deficit against the local material level, sure
// seeds, growth to half of each pore's own peak, volume from the summed deficit. `iso50`: one global
// threshold, 26-connected, voxels counted.
#pragma once

#include "analysis/field_of_view.h"
#include "analysis/grey_levels.h"
#include "analysis/material_level.h"
#include "analysis/part_map.h"
#include "analysis/pores.h"
#include "io/inspection_spec.h"

namespace halfmark {

struct SegmentedPores {
  std::vector<Pore>
      pores;  // id, kind, open, cut_by_field, centre, volume, diameter, mean grey, contrast, voxels,
              // index bounds are set; shape, calipers, area, depth, spacing are left to pore_shape.h
  PoreField field;
  // Noise of one voxel of the smoothed deficit and the seed threshold used, as shares of the contrast.
  double smoothed_noise = 0, seed_threshold = 0;
  double kernel_voxel = 0;  // Gaussian width of that smoothing, voxels
  double void_grey = 0;     // grey of a fully empty voxel inside pores (their plateau, else air)
  std::vector<std::string> warnings;
};

SegmentedPores segment_pores(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
                             const PartMap& part, const MaterialLevel& level, const PoreSpec& options,
                             const RunControl& control = {});

// Smallest diameter of a spherical pore whose blurred, smoothed peak deficit reaches the seed threshold with
// probability 0.9 (matched-filter estimate; a demonstrated figure needs seeded pores), mm.
double smallest_expected_diameter_mm(const SegmentedPores& found, const GreyLevels& levels, double voxel_mm);

}  // namespace halfmark
