#include "tests/benchmarks/accuracy_figures.h"

#include <algorithm>
#include <cmath>
#include <numbers>

#include "analysis/pore_iso50.h"

namespace halfmark::accuracy {

Chain run_chain(const VolumeSource& volume, double closing_radius_mm, bool with_iso50) {
  Chain chain;
  const FieldOfView field = find_field_of_view(volume);
  chain.levels = find_grey_levels(volume, field);
  PartOptions options;
  options.closing_radius_mm = closing_radius_mm;
  options.open_min_depth_mm = 2;
  chain.part = find_part(volume, field, chain.levels, options);
  chain.level = fit_material_level(volume, field, chain.levels, chain.part);
  chain.found = segment_pores(volume, field, chain.levels, chain.part, chain.level, {});
  if (with_iso50) {
    PoreSpec plain;
    plain.min_voxels = 1;
    chain.iso50 = segment_pores_iso50(volume, field, chain.levels, chain.part, plain);
  }
  chain.searched_voxels = static_cast<double>(chain.part.inside.voxel_count());
  return chain;
}

void ClassFigures::add(const ClassFigures& other) {
  total += other.total;
  found += other.found;
  volume += other.volume;
  diameter_square += other.diameter_square;
  centre_square += other.centre_square;
  volume_within += other.volume_within;
  volume_pull += other.volume_pull;
}

double ClassFigures::diameter_rms() const { return found == 0 ? 0 : std::sqrt(diameter_square / found); }
double ClassFigures::centre_rms() const { return found == 0 ? 0 : std::sqrt(centre_square / found); }

Comparison compare(const std::vector<phantoms::Ball>& balls, const std::vector<Pore>& pores) {
  Comparison out;
  std::vector<const phantoms::Ball*> order;
  for (const auto& ball : balls) order.push_back(&ball);
  std::stable_sort(order.begin(), order.end(),
                   [](const auto* a, const auto* b) { return a->diameter_mm > b->diameter_mm; });
  std::vector<bool> taken(pores.size(), false);
  for (const auto* ball : order) {
    ClassFigures& figures = out.classes[ball->diameter_mm];
    ++figures.total;
    double least = std::max(1.0, 0.5 * ball->diameter_mm);
    std::size_t best = pores.size();
    for (std::size_t i = 0; i < pores.size(); ++i) {
      const double d = length(pores[i].centre_mm - ball->centre_mm);
      if (!taken[i] && d < least) {
        least = d;
        best = i;
      }
    }
    if (best == pores.size()) continue;
    taken[best] = true;
    const double truth = std::numbers::pi / 6 * std::pow(ball->diameter_mm, 3);
    ++figures.found;
    figures.volume += pores[best].volume_mm3.value / truth - 1;
    figures.diameter_square += std::pow(pores[best].equivalent_diameter_mm - ball->diameter_mm, 2);
    figures.centre_square += least * least;
    const double pull =
        std::abs(pores[best].volume_mm3.value - truth) / pores[best].volume_mm3.standard_uncertainty;
    figures.volume_within += pull <= 2;
    figures.volume_pull += pull;
  }
  for (std::size_t i = 0; i < pores.size(); ++i) {
    if (taken[i]) continue;
    ++out.false_pores;
    out.false_list.push_back(pores[i]);
  }
  return out;
}

ScanModel scan_model(double blur_voxel, double contrast_to_noise, double cupping) {
  ScanModel scan;
  scan.air_grey = 20000;
  scan.material_grey = 45000;
  scan.blur_voxel = blur_voxel;
  scan.noise_grey = (scan.material_grey - scan.air_grey) / contrast_to_noise;
  scan.cupping = cupping;
  return scan;
}

}  // namespace halfmark::accuracy
