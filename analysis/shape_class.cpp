#include "analysis/shape_class.h"

#include <cmath>

namespace halfmark {

ShapeClass shape_class(const Calipers& calipers, double sphericity, double equivalent_diameter_mm,
                       double blur_mm) {
  if (std::isnan(sphericity) || equivalent_diameter_mm < resolved_blur_widths * blur_mm) {
    return ShapeClass::unclassified;
  }
  const double a = calipers.length, b = calipers.width, c = calipers.thickness;
  if (c < zingg_ratio * b && c < flat_ratio * a) return ShapeClass::flat;
  if (b > zingg_ratio * a && c > zingg_ratio * b && sphericity >= round_sphericity) return ShapeClass::round;
  return ShapeClass::irregular;
}

}  // namespace halfmark
