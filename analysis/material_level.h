// The local grey level of sound material: a robust low-order model over position and depth, so that cupping
// is followed and micro-shrinkage is not. Fitted on voxels at least 3 blur widths off any surface.
#pragma once

#include <memory>
#include <string>
#include <vector>

#include "analysis/grey_levels.h"
#include "analysis/part_map.h"

namespace halfmark {

class MaterialLevel {
 public:
  // Constant level.
  static MaterialLevel constant(double grey);

  // Level at the voxels x in [x_begin, x_end) of row (y, z), grey values, written to out[0 .. x_end -
  // x_begin).
  void row(std::int64_t y, std::int64_t z, std::int64_t x_begin, std::int64_t x_end, float* out) const;
  double at(double x, double y, double z) const;  // voxel index

  double standard_uncertainty = 0;  // of the level at a typical place, grey values
  double spread_percent = 0;        // largest minus smallest level over the part, % of contrast (cupping)
  std::vector<std::string> warnings;

  // The model itself; see material_level.cpp.
  struct Model;
  std::shared_ptr<const Model> model;
};

MaterialLevel fit_material_level(const VolumeSource& source, const FieldOfView& field,
                                 const GreyLevels& levels, const PartMap& part,
                                 const RunControl& control = {});

}  // namespace halfmark
