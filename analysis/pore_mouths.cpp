#include "analysis/pore_mouths.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <set>
#include <utility>

#include "analysis/mask_morphology.h"

namespace halfmark {

namespace {

// Blur rounds the rim of a mouth over about three edge widths.
constexpr double rim_widths = 3;

// Calls f(begin, end, a, b) for the common stretches of two rows of runs.
template <class A, class B, class F>
void for_overlaps(const A& row_a, const B& row_b, F f) {
  std::size_t j = 0;
  for (const auto& a : row_a) {
    while (j < row_b.size() && row_b[j].end <= a.begin) ++j;
    for (std::size_t k = j; k < row_b.size() && row_b[k].begin < a.end; ++k)
      f(std::max(a.begin, row_b[k].begin), std::min(a.end, row_b[k].end), a, row_b[k]);
  }
}

// Of a component of the open air.
struct Air {
  double faces_mm2 = 0, unheld_mm3 = 0;
};

std::vector<Air> measure_air(const Components& air, const RunLabels& windows, const PartMap& part,
                             const VolumeGeometry& g) {
  std::vector<Air> out(static_cast<std::size_t>(air.count) + 1);
  const auto& s = g.spacing_mm;
  const auto outside = [&](std::int64_t x, std::int64_t y, std::int64_t z) {
    return x >= 0 && y >= 0 && z >= 0 && x < g.size[0] && y < g.size[1] && z < g.size[2] &&
           !contains(part.inside, x, y, z);
  };
  for (std::int64_t z = 0; z < g.size[2]; ++z) {
    for (std::int64_t y = 0; y < g.size[1]; ++y) {
      const auto row = air.labels.row(y, z);
      for (const LabelRun& run : row) {
        Air& a = out[static_cast<std::size_t>(run.label)];
        a.unheld_mm3 += (run.end - run.begin) * g.voxel_volume_mm3();
        a.faces_mm2 += (outside(run.begin - 1, y, z) + outside(run.end, y, z)) * s[1] * s[2];
        for (std::int64_t x = run.begin; x < run.end; ++x) {
          a.faces_mm2 += (outside(x, y - 1, z) + outside(x, y + 1, z)) * s[0] * s[2] +
                         (outside(x, y, z - 1) + outside(x, y, z + 1)) * s[0] * s[1];
        }
      }
      for_overlaps(row, windows.row(y, z), [&](auto b, auto e, const LabelRun& run, const LabelRun&) {
        out[static_cast<std::size_t>(run.label)].unheld_mm3 -= (e - b) * g.voxel_volume_mm3();
      });
    }
  }
  return out;
}

}  // namespace

std::vector<PoreMouth> pore_mouths(const SegmentedPores& found, const VolumeGeometry& geometry,
                                   const PartMap& part) {
  std::vector<PoreMouth> out(found.pores.size());
  const bool any = std::any_of(found.pores.begin(), found.pores.end(), [](const Pore& p) { return p.open; });
  if (!any || part.open_air.size() != geometry.size) return out;
  const Components air = connected_components(part.open_air, 26);
  std::set<std::pair<std::int32_t, std::int32_t>> touching;  // pore, component
  for (std::int64_t z = 0; z < geometry.size[2]; ++z) {
    for (std::int64_t y = 0; y < geometry.size[1]; ++y) {
      for_overlaps(found.field.labels.row(y, z), air.labels.row(y, z),
                   [&](auto, auto, const LabelRun& pore, const LabelRun& component) {
                     touching.insert({pore.label, component.label});
                   });
    }
  }
  const std::vector<Air> of_component = measure_air(air, found.field.windows, part, geometry);
  for (const auto& [pore, component] : touching) {
    const auto i = static_cast<std::size_t>(pore) - 1;
    if (!found.pores[i].open) continue;
    out[i].area_mm2 += of_component[static_cast<std::size_t>(component)].faces_mm2;
    out[i].unheld_mm3 += std::max(0.0, of_component[static_cast<std::size_t>(component)].unheld_mm3);
  }
  return out;
}

double mouth_uncertainty_mm3(const PoreMouth& mouth, double closing_radius_mm, double edge_width_mm) {
  if (!(mouth.area_mm2 > 0)) return mouth.unheld_mm3;
  const double ball = closing_radius_mm;
  const double rim =
      std::min(std::sqrt(mouth.area_mm2 / std::numbers::pi) + rim_widths * edge_width_mm, ball);
  const double dip = std::max(ball - std::sqrt(ball * ball - rim * rim), edge_width_mm);
  return std::hypot(mouth.area_mm2 * dip / std::numbers::sqrt3, mouth.unheld_mm3);
}

}  // namespace halfmark
