#include "analysis/pore_uncertainty.h"

#include <algorithm>
#include <cmath>
#include <numbers>

namespace halfmark {

double edge_width_voxel(const GreyLevels& levels) {
  return std::sqrt(levels.blur_voxel * levels.blur_voxel + 1.0 / 12);
}

double sphere_area(double volume) {
  return volume > 0 ? std::cbrt(std::numbers::pi) * std::cbrt(36 * volume * volume) : 0;
}

void set_volume_term(Pore& pore, const std::string& name, double standard_uncertainty_mm3) {
  Measured& volume = pore.volume_mm3;
  const auto term = std::find_if(volume.contributions.begin(), volume.contributions.end(),
                                 [&](const Contribution& c) { return c.name == name; });
  if (term == volume.contributions.end()) {
    volume.contributions.push_back({name, standard_uncertainty_mm3});
  } else {
    term->standard_uncertainty = standard_uncertainty_mm3;
  }
  double squares = 0;
  for (const Contribution& c : volume.contributions)
    squares += c.standard_uncertainty * c.standard_uncertainty;
  volume.standard_uncertainty = std::sqrt(squares);
  pore.diameter_standard_uncertainty_mm =
      volume.value > 0 ? pore.equivalent_diameter_mm * volume.standard_uncertainty / (3 * volume.value) : 0;
}

}  // namespace halfmark
