// Prints how well pores are found and sized, as markdown: balls of 2 to 30 voxels at random sub-voxel places
// of a slightly turned block, for each blur, contrast-to-noise and cupping, beside one global threshold
// (iso50) on the same volumes. Exits with 1 if a required figure is missed.
//
//   pore_accuracy              the table
//   pore_accuracy --further    further phantoms: pairs, faces, discs, clouds, correlated noise, rings ...
//   pore_accuracy --only BLUR CONTRAST_TO_NOISE CUPPING    one combination
#include <algorithm>
#include <cmath>
#include <cstdio>
#include <cstdlib>
#include <cstring>
#include <string>
#include <vector>

#include "tests/benchmarks/accuracy_figures.h"

using namespace halfmark;
using namespace halfmark::accuracy;

namespace {

constexpr double classes[] = {2, 3, 4, 5, 6, 8, 10, 15, 20, 30};
constexpr int balls_per_class = 40;
constexpr std::int64_t volume_edge = 256;
constexpr double block_share = 0.82;
// Clear of the neighbour's and the face's blur at 1.5 voxels.
constexpr double gap_voxel = 6;
constexpr double reference_volume = 192.0 * 192 * 192;

struct Combination {
  double blur, contrast_to_noise, cupping;
};

// The figures that must hold, by blur and contrast-to-noise; others are printed only.
struct Limits {
  double found_from = 0, found_percent = 99;
  double volume_from = 0, volume_percent = 0;
  double size_from = 0, diameter_rms = 0, centre_rms = 0;  // 0: no limit
};

bool limits_of(const Combination& c, Limits& limits) {
  if (c.blur <= 1 && c.contrast_to_noise >= 10) {
    limits = {3, 99, 5, 3, 5, 0.15, 0.15};
    return true;
  }
  if (c.blur == 1.5 && c.contrast_to_noise == 5) {
    limits = {6, 99, 8, 6, 0, 0, 0};
    return true;
  }
  return false;
}

struct Result {
  Combination combination{};
  Comparison local, iso50;
  double searched_voxels = 0, smoothed_noise = 0, seed_threshold = 0, expected_mm = 0, blur = 0;
  std::vector<std::string> missed;
};

void check(Result& result) {
  Limits limits;
  if (!limits_of(result.combination, limits)) return;
  const auto miss = [&](const char* what, double diameter, double value, double limit) {
    char text[160];
    std::snprintf(text, sizeof text, "%s at %g voxels: %.3f, limit %g", what, diameter, value, limit);
    result.missed.emplace_back(text);
  };
  ClassFigures all;
  for (const auto& [diameter, figures] : result.local.classes) {
    if (diameter >= limits.found_from) all.add(figures);
    if (diameter >= limits.volume_from && std::abs(figures.volume_error_percent()) > limits.volume_percent)
      miss("mean volume error, %,", diameter, figures.volume_error_percent(), limits.volume_percent);
    if (limits.diameter_rms == 0 || diameter < limits.size_from) continue;
    if (figures.diameter_rms() > limits.diameter_rms)
      miss("diameter error, RMS voxels,", diameter, figures.diameter_rms(), limits.diameter_rms);
    if (figures.centre_rms() > limits.centre_rms)
      miss("centre error, RMS voxels,", diameter, figures.centre_rms(), limits.centre_rms);
  }
  if (all.found_percent() < limits.found_percent)
    miss("found share, %, from", limits.found_from, all.found_percent(), limits.found_percent);
  if (result.local.false_pores > 0) miss("false pores, all,", 0, result.local.false_pores, 0);
}

Result run(const Combination& c, std::uint64_t seed) {
  std::vector<double> diameters;
  for (int i = static_cast<int>(std::size(classes)) - 1; i >= 0; --i)
    diameters.insert(diameters.end(), balls_per_class, classes[i]);
  const auto phantom =
      phantoms::balls_in_block(phantoms::cube_geometry(volume_edge), diameters, gap_voxel, seed, block_share);
  ScanModel scan = scan_model(c.blur, c.contrast_to_noise, c.cupping);
  scan.seed = seed;
  const Chain chain = run_chain(render_scan(phantom.bodies, phantom.geometry, scan));
  Result out;
  out.combination = c;
  out.local = compare(phantom.balls, chain.found.pores);
  out.iso50 = compare(phantom.balls, chain.iso50.pores);
  out.searched_voxels = chain.searched_voxels;
  out.smoothed_noise = chain.found.smoothed_noise;
  out.seed_threshold = chain.found.seed_threshold;
  out.expected_mm = smallest_expected_diameter_mm(chain.found, chain.levels, 1);
  out.blur = chain.levels.blur_voxel;
  check(out);
  return out;
}

void print(const Result& r) {
  std::printf("\n### Blur %.1f voxel, contrast-to-noise %g, cupping %g %%\n\n", r.combination.blur,
              r.combination.contrast_to_noise, 100 * r.combination.cupping);
  std::printf(
      "Blur measured %.3f voxel; smoothed noise %.4f, seeds from %.3f of the contrast; smallest pore "
      "to be expected %.2f voxels. False pores: %d in %.1f million voxels (%.2f times 192^3); `iso50` "
      "without a size filter: %d.\n\n",
      r.blur, r.smoothed_noise, r.seed_threshold, r.expected_mm, r.local.false_pores, r.searched_voxels / 1e6,
      r.searched_voxels / reference_volume, r.iso50.false_pores);
  std::printf(
      "| diameter, voxels | found | mean volume error | diameter RMS, voxels | centre RMS, voxels | "
      "within U (k = 2) | mean error / u | `iso50` found | `iso50` volume error |\n"
      "|---|---|---|---|---|---|---|---|---|\n");
  for (const auto& [diameter, figures] : r.local.classes) {
    const ClassFigures& plain = r.iso50.classes.at(diameter);
    std::printf("| %g | %d of %d | %+.1f %% | %.3f | %.3f | %.0f %% | %.2f | %d | %+.1f %% |\n", diameter,
                figures.found, figures.total, figures.volume_error_percent(), figures.diameter_rms(),
                figures.centre_rms(), figures.within_percent(), figures.mean_pull(), plain.found,
                plain.volume_error_percent());
  }
  for (const Pore& pore : r.local.false_list)
    std::printf("\nFalse: %.2f voxels across at %.1f %.1f %.1f, peak %.3f\n", pore.equivalent_diameter_mm,
                pore.centre_mm[0], pore.centre_mm[1], pore.centre_mm[2], pore.contrast);
  for (const std::string& missed : r.missed) std::printf("\n**Missed:** %s\n", missed.c_str());
  std::fflush(stdout);
}

// One line a combination: what holds from 3 voxels (found) and from 5 voxels (sizes) on, the worst class
// each.
void print_summary(const std::vector<Result>& results) {
  std::printf(
      "\n| blur | contrast-to-noise | cupping | found, from 3 voxels | false | worst mean volume error, from "
      "5 | "
      "worst diameter RMS | worst centre RMS | `iso50`: false | `iso50`: volume error at 6 |\n"
      "|---|---|---|---|---|---|---|---|---|---|\n");
  for (const Result& r : results) {
    int found = 0, total = 0;
    double volume = 0, diameter = 0, centre = 0;
    for (const auto& [size, figures] : r.local.classes) {
      found += size >= 3 ? figures.found : 0;
      total += size >= 3 ? figures.total : 0;
      if (size < 5) continue;
      if (std::abs(figures.volume_error_percent()) > std::abs(volume))
        volume = figures.volume_error_percent();
      diameter = std::max(diameter, figures.diameter_rms());
      centre = std::max(centre, figures.centre_rms());
    }
    std::printf("| %.1f | %g | %g %% | %d of %d | %d | %+.1f %% | %.3f | %.3f | %d | %+.1f %% |\n",
                r.combination.blur, r.combination.contrast_to_noise, 100 * r.combination.cupping, found,
                total, r.local.false_pores, volume, diameter, centre, r.iso50.false_pores,
                r.iso50.classes.at(6).volume_error_percent());
  }
}

int print_table(const std::vector<Combination>& combinations) {
  int missed = 0, required_false = 0;
  double required_voxels = 0;
  std::vector<Result> results;
  for (const Combination& c : combinations) {
    // The same places for all combinations, other noise.
    results.push_back(run(c, 7));
    const Result& result = results.back();
    print(result);
    missed += static_cast<int>(result.missed.size());
    Limits limits;
    if (!limits_of(c, limits)) continue;
    required_false += result.local.false_pores;
    required_voxels += result.searched_voxels;
  }
  print_summary(results);
  std::printf(
      "\nWhere figures are required: %d false pores in %.1f million voxels, %.1f times 192^3. "
      "Required figures missed: %d.\n",
      required_false, required_voxels / 1e6, required_voxels / reference_volume, missed);
  return missed == 0 ? 0 : 1;
}

}  // namespace

int main(int argc, char** argv) {
  if (argc == 2 && std::strcmp(argv[1], "--further") == 0) return print_further_phantoms() ? 0 : 1;
  if (argc == 5 && std::strcmp(argv[1], "--only") == 0)
    return print_table({{std::atof(argv[2]), std::atof(argv[3]), std::atof(argv[4])}});
  if (argc != 1) {
    std::fprintf(stderr, "usage: pore_accuracy [--further | --only BLUR CONTRAST_TO_NOISE CUPPING]\n");
    return 64;
  }
  std::vector<Combination> all;
  for (const double blur : {0.7, 1.0, 1.5}) {
    for (const double contrast_to_noise : {30.0, 10.0, 5.0}) {
      for (const double cupping : {0.0, 0.08}) all.push_back({blur, contrast_to_noise, cupping});
    }
  }
  return print_table(all);
}
