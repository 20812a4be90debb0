// Pass B: which voxels are the part. Outside air, the part body with its pores, other bodies, the field's
// border.
#pragma once

#include <string>
#include <vector>

#include "analysis/field_of_view.h"
#include "analysis/grey_levels.h"
#include "analysis/run_mask.h"
#include "io/run_control.h"
#include "io/volume_source.h"

namespace halfmark {

struct PartOptions {
  double closing_radius_mm = 0.5;  // > 0: outside is where a ball of this radius can roll in from the border
  double open_min_depth_mm = 0.2;  // >= 0: shallower residues of the closing belong to the outside
  int body = 0;                    // 0: the largest; N: the Nth largest (from 1)
};

struct Body {
  std::int64_t voxels = 0;  // material voxels
  double volume_mm3 = 0;
  Vec3 min_mm{}, max_mm{};  // of its voxel centres
  bool cut_by_field = false;
};

struct PartMap {
  // The part with its pores filled: material, enclosed air, and air behind mouths that the ball does not
  // pass. Its border towards the outside is the part's own surface.
  RunMask inside;
  // Material voxels (grey >= threshold) of the chosen body.
  RunMask material;
  // Air of `inside` that is connected with the outside (open pores), 6-connected.
  RunMask open_air;
  double closing_radius_mm = 0;  // of the ball that closed their mouths
  std::vector<Body> bodies;      // largest first, at least the chosen one
  int body = 1;                  // the chosen one, from 1
  bool has_outside = true;       // false: material or its pores fill the field
  bool cut_by_field = false;     // the part reaches the field's border
  std::vector<std::string> warnings;
};

// Air below the threshold is 6-connected for the outside, material 26-connected for bodies.
// Throws Problem(bad_data): no material, body N does not exist.
PartMap find_part(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
                  const PartOptions& options = {}, const RunControl& control = {});

}  // namespace halfmark
