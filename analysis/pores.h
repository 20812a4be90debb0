// Pores as values: what was found, how large, how sure. Built by pore_segmentation.h, completed by
// pore_shape.h.
#pragma once

#include <array>
#include <cstdint>
#include <limits>
#include <string>
#include <vector>

#include "analysis/measured.h"
#include "analysis/run_mask.h"
#include "io/vec3.h"

namespace halfmark {

enum class PoreKind {
  closed,        // no way out
  open,          // connected with the outside through a mouth
  cut_by_field,  // reaches the border of the field of view: its size is a lower bound
  in_between,    // grey plateau between air and material: trapped powder, core sand
  diffuse,       // a region of lowered grey without pores of its own: micro-shrinkage
  inclusion      // denser than the material
};

// Rule (stated in pore_shape.cpp): from the calipers length >= width >= thickness and sphericity.
enum class ShapeClass { unclassified, round, irregular, flat };

constexpr double not_measured = std::numeric_limits<double>::quiet_NaN();

enum class Verdict { accept, reject, undecided };

struct Pore {
  std::int32_t id = 0;  // from 1, largest volume first; equals the label in PoreField
  PoreKind kind = PoreKind::closed;
  ShapeClass shape = ShapeClass::unclassified;
  bool open = false, cut_by_field = false;
  Vec3 centre_mm{};                   // deficit-weighted centre
  Measured volume_mm3;                // from the summed grey deficit
  double equivalent_diameter_mm = 0;  // of the sphere of that volume
  double diameter_standard_uncertainty_mm = 0;
  double length_mm = 0, width_mm = 0,
         thickness_mm = 0;  // largest caliper; largest across it; smallest caliper
  double surface_area_mm2 = not_measured;
  double sphericity = not_measured;  // Wadell; not_measured where the pore is too small for a surface
  double depth_mm =
      not_measured;  // least material to the part's surface; 0 for open pores; none without outside
  double spacing_mm = not_measured;  // least gap to another pore's surface, up to spacing_reach
  std::int32_t nearest_id = 0;       // that pore; 0: none within reach
  double mean_grey = 0;              // over the label voxels
  double contrast = 0;      // peak of the grey deficit / (level - air): 1 is air, small ones are lower
  std::int64_t voxels = 0;  // label voxels
  std::array<std::int32_t, 3> min_index{}, max_index{};  // of the label voxels, inclusive
  std::vector<std::string> zones;                        // ids of the zones that hold its centre
  bool left_out = false;    // centre in an excluded or expected-void zone: listed nowhere, counted nowhere
  std::string disposition;  // an inspector's reason for excluding it; empty: counts
  Verdict verdict = Verdict::accept;  // reject: alone breaks a requirement
};

// The grey deficit of every voxel in the pores' windows, by pore: all sums (zones, sections, reference
// bodies) come from it without another pass over the voxels. fraction[i] belongs to the i-th voxel of the
// runs in order.
struct PoreField {
  RunLabels windows;                   // label: pore id; each voxel belongs to its nearest pore
  std::vector<std::int16_t> fraction;  // pore share of the voxel in 1/4096; may be negative by noise
  RunLabels labels;                    // the label voxels (grown to half of the pore's own peak)
  static constexpr int unit = 4096;
};

}  // namespace halfmark
