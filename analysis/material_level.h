// The local grey level of sound material: a robust low-order model over position and depth, so that cupping
// is followed and micro-shrinkage is not. Fitted on voxels at least 3 blur widths off any surface.
#pragma once

#include <array>
#include <cstdint>
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
  // The same over several rows of one plane: its terms are gathered once.
  class Plane;
  Plane plane(std::int64_t z) const;

  double standard_uncertainty = 0;  // of the level at a typical place, grey values
  double spread_percent = 0;        // largest minus smallest level over the part, % of contrast (cupping)
  std::vector<std::string> warnings;

  // The model itself; see material_level.cpp.
  struct Model;
  std::shared_ptr<const Model> model;
};

class MaterialLevel::Plane {
 public:
  void row(std::int64_t y, std::int64_t x_begin, std::int64_t x_end, float* out) const;

 private:
  friend class MaterialLevel;
  const Model* model_ = nullptr;
  std::array<std::array<double, 5>, 5> terms_{};  // [power of y][power of x]
};

MaterialLevel fit_material_level(const VolumeSource& source, const FieldOfView& field,
                                 const GreyLevels& levels, const PartMap& part,
                                 const RunControl& control = {});

}  // namespace halfmark
