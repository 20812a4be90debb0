// Pass A: air and material levels, noise and its correlation, contrast, blur, ISO-50 threshold.
#pragma once

#include <array>
#include <optional>
#include <string>
#include <vector>

#include "analysis/field_of_view.h"
#include "io/inspection_spec.h"
#include "io/run_control.h"
#include "io/volume_source.h"

namespace halfmark {

struct Histogram {
  double first_grey = 0, bin_width = 1;  // centre of bin 0; width of a bin
  std::vector<std::int64_t> counts;      // voxels of the field of view only
};

struct GreyLevels {
  double air = 0, material = 0;  // grey values of the modes (material's: a typical level, see MaterialLevel)
  double threshold = 0;          // ISO-50: half way between them
  double air_noise = 0, material_noise = 0;  // standard deviation within one phase, grey values
  double contrast_to_noise = 0;              // (material - air) / material_noise
  // Blur: standard deviation of the Gaussian beside voxel averaging (which adds 1/12 voxel^2 of variance).
  double blur_mm = 0;
  double blur_voxel = 0;  // blur_mm in units of VolumeGeometry::voxel_mm()
  double blur_standard_uncertainty_voxel = 0;
  bool blur_measured = false;  // false: no sound edges; blur_voxel is a stated assumption
  // Autocorrelation of the material's noise at lag 1 along x, y, z; called white within +-0.04.
  std::array<double, 3> noise_correlation{0, 0, 0};
  bool noise_is_white = true;
  double threshold_standard_uncertainty = 0;  // grey values
  std::string source = "auto";                // "auto", "spec" or "spec, auto" (one of the two levels given)
  std::vector<double> other_peaks;            // further modes (a third material ...)
  bool air_seen = true, material_seen = true;
  std::int64_t material_clear_voxels = 0;  // that the blocks its noise is taken from lie off any edge
  Histogram histogram;
  std::vector<std::string> warnings;  // what looks wrong, in plain words

  double contrast() const { return material - air; }
};

// Throws Problem(bad_data) when two phases cannot be told apart (constant, pure noise, one phase only) and
// the spec does not give both levels; the sentence says what was seen and what to do. NaN and infinity:
// bad_data with the place.
GreyLevels find_grey_levels(const VolumeSource& source, const FieldOfView& field, const GreySpec& given = {},
                            const RunControl& control = {});

}  // namespace halfmark
