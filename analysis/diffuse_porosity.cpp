#include "analysis/diffuse_porosity.h"

#include <algorithm>
#include <iterator>

#include "analysis/quantiles.h"

namespace halfmark {

namespace {

// As for single pores: a normal value exceeds it with 2e-9.
constexpr double seed_noises = 5.9;
// What level model, rings and streaks leave over 12 voxels may reach a percent of the contrast.
constexpr double least_seed = 0.02;
constexpr double level_uncertainties = 6;
constexpr double low_share = 0.5;
// Smaller regions hold less than two independent means of 3 x 3 x 3 cells.
constexpr std::size_t least_cells = 8;
// With fewer means their scatter says nothing.
constexpr std::size_t least_means = 200;
// A pore is weak below this mean deficit. Over 12 voxels a small pore thins out to some percent of its own
// mean deficit, a flat one to sqrt(2 pi) w / 12 of it or a little more (w: width of its blurred profile, up
// to 2 voxels: 0.42), a region not at all. Where noise left only the upper part of a region in the label, the
// label's mean is too high, but then the label holds too little of what its window holds: a flat pore's holds
// 0.86 and more (erf of 1.06, its half-peak width against its blur).
constexpr double weak_deficit = 0.2;
constexpr double same_around = 0.6, some_around = 0.25;
constexpr double most_held = 0.7;

double scatter_of(const std::vector<float>& means) {
  std::vector<float> known;
  std::copy_if(means.begin(), means.end(), std::back_inserter(known),
               [](float m) { return m > DeficitCells::not_enough; });
  return known.size() < least_means ? 0 : lower_side_deviation(known);
}

std::array<std::int64_t, 3> centre_of(const PoreSums& s) {
  const std::int64_t weight = std::max<std::int64_t>(s.weight, 1);
  return {s.moment[0] / weight, s.moment[1] / weight, s.moment[2] / weight};
}

bool is_weak_all_over(const PoreSums& s, const DeficitCells& cells, const std::vector<float>& around) {
  if (s.label_voxels == 0 || s.weight == 0) return false;
  const double mean = static_cast<double>(s.label) / PoreField::unit / static_cast<double>(s.label_voxels);
  if (mean >= weak_deficit) return false;
  const auto c = centre_of(s);
  const double wide = static_cast<double>(around[cells.index_of_voxel(c[0], c[1], c[2])]);
  return wide >= same_around * mean ||
         (wide >= some_around * mean &&
          static_cast<double>(s.label) < most_held * static_cast<double>(s.window));
}

void take_windows_out(DeficitCells& cells, const PoreWindows& pores, const std::vector<std::uint8_t>& keep) {
  const auto& size = pores.windows.size();
  std::size_t at = 0;
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (const LabelRun& run : pores.windows.row(y, z)) {
        const bool kept = keep[static_cast<std::size_t>(run.label)] != 0;
        for (std::int32_t x = run.begin; x < run.end; ++x, ++at) {
          if (!kept && pores.clear[at] != 0) cells.take_out(x, y, z, pores.fraction[at]);
        }
      }
    }
  }
}

// Calls f(index) for the cells that touch cell i.
template <class F>
void for_neighbours(const DeficitCells& cells, std::size_t i, const F& f) {
  const auto& n = cells.count();
  const auto at = static_cast<std::int64_t>(i);
  const std::int64_t x = at % n[0], y = at / n[0] % n[1], z = at / (n[0] * n[1]);
  for (std::int64_t cz = std::max<std::int64_t>(0, z - 1); cz <= std::min(n[2] - 1, z + 1); ++cz) {
    for (std::int64_t cy = std::max<std::int64_t>(0, y - 1); cy <= std::min(n[1] - 1, y + 1); ++cy) {
      for (std::int64_t cx = std::max<std::int64_t>(0, x - 1); cx <= std::min(n[0] - 1, x + 1); ++cx)
        f(cells.index(cx, cy, cz));
    }
  }
}

void grow_regions(const DeficitCells& cells, const std::vector<float>& means, DiffuseRegions& out) {
  const auto low = static_cast<float>(low_share * out.seed_threshold);
  const auto seed = static_cast<float>(out.seed_threshold);
  std::vector<std::uint8_t> seen(means.size(), 0);
  std::vector<std::size_t> members;
  for (std::size_t i = 0; i < means.size(); ++i) {
    if (means[i] < seed || seen[i] != 0) continue;
    members.assign(1, i);
    seen[i] = 1;
    float peak = 0;
    for (std::size_t next = 0; next < members.size(); ++next) {
      peak = std::max(peak, means[members[next]]);
      for_neighbours(cells, members[next], [&](std::size_t k) {
        if (seen[k] != 0 || means[k] < low) return;
        seen[k] = 1;
        members.push_back(k);
      });
    }
    if (members.size() < least_cells) continue;
    ++out.count;
    out.peak.push_back(peak);
    for (const std::size_t k : members) out.region[k] = out.count;
  }
}

}  // namespace

DiffuseRegions find_diffuse_regions(DeficitCells& cells, const PoreWindows& pores,
                                    const std::vector<std::array<std::int32_t, 3>>& unlisted,
                                    double level_uncertainty, const RunControl& control) {
  DiffuseRegions out;
  out.swallowed.assign(pores.sums.size(), 0);
  out.peak.assign(1, 0);
  const std::vector<float> around = cells.means();
  for (std::size_t l = 1; l < pores.sums.size(); ++l)
    out.swallowed[l] = is_weak_all_over(pores.sums[l], cells, around) ? 1 : 0;
  control.throw_if_cancelled();
  take_windows_out(cells, pores, out.swallowed);
  for (const auto& v : unlisted) cells.blank(v[0], v[1], v[2], 1);
  const std::vector<float> means = cells.means();
  control.throw_if_cancelled();
  out.region.assign(means.size(), 0);
  out.noise = scatter_of(means);
  if (out.noise > 0) {
    out.seed_threshold =
        std::max({seed_noises * out.noise, least_seed, level_uncertainties * level_uncertainty});
    grow_regions(cells, means, out);
  }
  for (std::size_t l = 1; l < pores.sums.size(); ++l) {
    const auto c = centre_of(pores.sums[l]);
    if (out.swallowed[l] != 0 && out.region[cells.index_of_voxel(c[0], c[1], c[2])] == 0)
      out.swallowed[l] = 0;
  }
  return out;
}

}  // namespace halfmark
