#include "analysis/pore_fillings.h"

#include <algorithm>
#include <cmath>

namespace halfmark {

namespace {

// Plateaus between these shares of the contrast are neither air nor material: powder, core sand. Loose powder
// and sand fill a third to two thirds of their room (from memory); what is emptier counts as a void.
constexpr double in_between_low = 0.2, in_between_high = 0.7;
// A plateau is flat: its voxels scatter by little more than the noise (times the factor, for the noise of air
// and material differ) and a filling's own texture, a share of the contrast; its peak rises above it no more
// than that. What scatters more is a cluster of voids and counts as such.
constexpr double plateau_noise_factor = 1.5, plateau_texture = 0.08, plateau_peak = 0.15;
// It differs from air and from material by so many standard errors of its mean.
constexpr double plateau_standard_errors = 5;

}  // namespace

double plateau_of(const PoreSums& s) {
  if (s.core_voxels < least_core_voxels) return 0;
  return static_cast<double>(s.core) / PoreField::unit / static_cast<double>(s.core_voxels);
}

bool is_in_between(const PoreSums& s, double peak, const GreyLevels& levels, double smoothed_noise) {
  const double plateau = plateau_of(s);
  if (plateau <= in_between_low || plateau >= in_between_high) return false;
  const double n = static_cast<double>(s.core_voxels), unit = PoreField::unit;
  const double variance =
      std::max(static_cast<double>(s.core_square) / (unit * unit) / n - plateau * plateau, 0.0);
  const double noise = plateau_noise_factor / levels.contrast_to_noise;
  if (variance > noise * noise + plateau_texture * plateau_texture) return false;
  const double gap = std::min(plateau, 1 - plateau);
  return gap > plateau_standard_errors * std::sqrt(variance / n) &&
         peak < plateau + plateau_peak + 4 * smoothed_noise;
}

}  // namespace halfmark
