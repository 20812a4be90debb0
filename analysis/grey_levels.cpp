// How the levels are chosen
//
// Air is the lowest mode that holds a share of the voxels worth the name, material the mode above it with the
// most voxels. The histogram is smoothed at the scale of the noise, which is measured first, without any
// level, from small blocks. A volume with one mode only, or with modes nearer to each other than the noise
// can part, is refused with the reason, unless the spec gives both levels.
#include "analysis/grey_levels.h"

#include <algorithm>
#include <cmath>

#include "analysis/blur_estimate.h"
#include "analysis/grey_modes.h"
#include "analysis/histogram.h"
#include "analysis/noise_estimate.h"
#include "analysis/number_text.h"
#include "analysis/sample_windows.h"
#include "analysis/thin_wall_level.h"

namespace halfmark {

namespace {

// Modes nearer than this many noises are one phase as far as a threshold between them is concerned.
constexpr double least_separation = 3;
// A lag-1 correlation beyond this is no accident of some thousand voxels.
constexpr double white_limit = 0.04;
// Noise of a mean of 27 voxels: a fifth where it is white, more where it is correlated.
constexpr double block_mean_noise = 0.3;
// Beyond this many noises a voxel of a thousand is no accident.
constexpr double noise_tail = 4.5;
constexpr double assumed_blur_voxel = 0.8;
constexpr double voxel_width =
    0.28867513459481287;  // standard deviation of a voxel's own averaging, 1 / sqrt(12)
// Blocks this far off any edge tell a level better than the mode does.
constexpr std::int64_t least_clear = 2;
// Material this many edge widths off its faces shows its level: 2 (1 - Phi(2.5)) = 1.2 % are lost at the
// block's rim.
constexpr double plateau_widths = 2.5;
constexpr double lost_worth_a_word = 0.02;
// How low the mode of a thin material may lie (5 voxels across: 8 % at a blur of 1, 19 % at 1.5), as a
// standard uncertainty.
constexpr double thin_material_share = 0.1;
constexpr double clipped_share_worth_a_word = 0.001;
// A further peak is worth a word when its valleys reach below half of its height and homogeneous blocks of it
// are found; faces along the voxel axes and noise-free edges make peaks of partial volumes too.
constexpr double further_peak_valley = 0.5;
constexpr double further_peak_width = 0.04;  // of the contrast, where noise is less
// Blocks up to this share of the contrast above the material's level may be material (cupping); beyond lie
// inclusions and their rims.
constexpr double highest_material = 0.2;
// Mode finding of a peak of width s scatters by about this share of s (binning, smoothing, cupping within the
// peak).
constexpr double mode_scatter = 0.05;

bool is_constant(const Histogram& h) {
  return std::count_if(h.counts.begin(), h.counts.end(), [](std::int64_t c) { return c > 0; }) < 2;
}

[[noreturn]] void refuse(const std::string& sentence) {
  throw Problem(ExitStatus::bad_data, "grey levels: " + sentence);
}

void choose_modes(const HistogramShape& shape, double noise, const GreySpec& given, GreyLevels& out) {
  const auto& modes = shape.modes;
  if (given.air) out.air = *given.air;
  if (given.material) out.material = *given.material;
  if (given.air && given.material) {
    out.source = "spec";
  } else {
    if (given.air || given.material) out.source = "spec, auto";
    if (modes.empty())
      refuse("no peak stands out in the histogram; give grey_levels.air and .material in the spec");
    if (modes.size() == 1 && !given.air && !given.material) {
      refuse(sentence(
          "only one phase is seen, at grey %.5g (noise %.3g): air and material cannot be told apart; "
          "check that the volume "
          "holds the part and air, or give grey_levels in the spec",
          modes[0].grey, noise));
    }
    if (!given.air) out.air = modes.front().grey;
    if (!given.material) {
      const GreyMode* best = nullptr;
      for (const GreyMode& mode : modes) {
        if (mode.grey > out.air + noise && (best == nullptr || mode.mass > best->mass)) best = &mode;
      }
      if (best == nullptr)
        refuse(sentence("no peak lies above the air level of %.5g; give grey_levels.material in the spec",
                        out.air));
      out.material = best->grey;
    }
  }
  if (!(out.material > out.air))
    refuse(sentence(
        "the material level %.5g does not lie above the air level %.5g; check grey_levels in the spec",
        out.material, out.air));
  if (out.source != "spec" && out.material - out.air < least_separation * noise) {
    refuse(
        sentence("the two peaks at %.5g and %.5g lie closer than three times the noise: they cannot be told "
                 "apart; scan with less noise "
                 "or give grey_levels in the spec",
                 out.air, out.material));
  }
}

// Modes apart from air and material that are phases: somewhere whole blocks show their grey.
void find_other_phases(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field,
                       const HistogramShape& shape, double noise, GreyLevels& out) {
  const double near = std::max(2 * noise, 0.05 * out.contrast());
  const double width = std::max(noise_tail * noise, further_peak_width * out.contrast());
  for (const GreyMode& mode : shape.modes) {
    if (mode.valley >= further_peak_valley * mode.height || std::abs(mode.grey - out.air) <= near ||
        std::abs(mode.grey - out.material) <= near)
      continue;
    if (estimate_noise(source, windows, field, mode.grey - width, mode.grey + width).blocks > 0)
      out.other_peaks.push_back(mode.grey);
  }
}

// A mode leans towards the partial volumes between the phases when it is broad; the mean of blocks off any
// edge does not.
double refined_level(double mode, const NoiseEstimate& blocks, double first_noise) {
  const bool sound = blocks.clear_voxels >= least_clear &&
                     std::abs(blocks.level - mode) < std::max(blocks.deviation, first_noise);
  return sound ? blocks.level : mode;
}

void measure_noise(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field,
                   double first_noise, const GreySpec& given, GreyLevels& out) {
  const double inf = 1e300;
  // At low contrast-to-noise the threshold itself would cut the tails of the noise.
  const double tail = noise_tail * first_noise;
  const NoiseEstimate material =
      estimate_noise(source, windows, field, std::min(out.threshold, out.material - tail),
                     out.material + std::max(tail, highest_material * out.contrast()));
  const NoiseEstimate air =
      estimate_noise(source, windows, field, -inf, std::max(out.threshold, out.air + tail));
  out.material_clear_voxels = material.clear_voxels;
  if (!given.air) out.air = refined_level(out.air, air, first_noise);
  if (!given.material) out.material = refined_level(out.material, material, first_noise);
  out.threshold = 0.5 * (out.air + out.material);
  out.material_seen = material.blocks > 0;
  out.air_seen = air.blocks > 0;
  out.material_noise = out.material_seen ? material.deviation : first_noise;
  out.air_noise = out.air_seen ? air.deviation : out.material_noise;
  out.noise_correlation = material.correlation;
  out.noise_is_white = std::all_of(material.correlation.begin(), material.correlation.end(),
                                   [](double c) { return std::abs(c) < white_limit; });
  out.contrast_to_noise = out.material_noise > 0 ? out.contrast() / out.material_noise : 1e6;
  if (!out.material_seen)
    out.warnings.emplace_back(
        "no homogeneous material is large enough to measure its noise; a first estimate over all blocks is "
        "used");
}

// Where no material is thick enough for a plateau, walls tell its level and the blur. Returns the standard
// uncertainty of the level; 0: nothing changed.
double correct_by_walls(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field,
                        const GreySpec& given, GreyLevels& out) {
  // What the faces on both sides take off the level in the middle of blocks so far off them.
  const double width = std::hypot(out.blur_voxel, voxel_width);
  const double off = (static_cast<double>(out.material_clear_voxels) + 0.5) / width;
  if (off > plateau_widths || given.material) return 0;
  const ThinWallLevel walls = estimate_thin_walls(
      source, windows, field, {out.air, out.material, std::max(out.material_noise, out.air_noise)});
  const double lost = std::min(thin_material_share, std::erfc(off / std::sqrt(2.0)));
  if (walls.walls == 0 && lost < lost_worth_a_word) return lost * out.contrast();
  if (walls.walls == 0) {
    out.warnings.emplace_back(
        "the material is nowhere thick enough to show its own grey level, and no sound wall tells it: the "
        "level may lie a tenth of the contrast too low; give grey_levels.material in the spec");
    return lost * out.contrast();
  }
  out.material = walls.material;
  out.threshold = 0.5 * (out.air + out.material);
  out.contrast_to_noise = out.material_noise > 0 ? out.contrast() / out.material_noise : 1e6;
  out.blur_measured = true;
  out.blur_voxel = walls.sigma_voxel;
  out.blur_standard_uncertainty_voxel = walls.sigma_standard_uncertainty;
  out.blur_mm = out.blur_voxel * source.geometry().voxel_mm();
  return walls.standard_uncertainty;
}

void measure_blur(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field,
                  GreyLevels& out) {
  const BlurEstimate blur = estimate_blur(
      source, windows, field, {out.air, out.material, std::max(out.material_noise, out.air_noise)});
  out.blur_measured = blur.sigma_voxel > 0;
  out.blur_voxel = out.blur_measured ? blur.sigma_voxel : assumed_blur_voxel;
  out.blur_standard_uncertainty_voxel = out.blur_measured ? blur.standard_uncertainty : 0.3;
  out.blur_mm = out.blur_voxel * source.geometry().voxel_mm();
}

void say_what_looks_wrong(const HistogramShape& shape, GreyLevels& out) {
  if (shape.clipped_low > clipped_share_worth_a_word) {
    out.warnings.push_back(
        sentence("%.3g %% of the voxels have the least grey value the file can hold: dark values are clipped",
                 100 * shape.clipped_low));
  }
  if (shape.clipped_high > clipped_share_worth_a_word) {
    out.warnings.push_back(sentence(
        "%.3g %% of the voxels have the greatest grey value the file can hold: bright values are clipped",
        100 * shape.clipped_high));
  }
  if (!out.other_peaks.empty()) {
    std::string peaks;
    for (const double peak : out.other_peaks) peaks += (peaks.empty() ? "" : ", ") + sentence("%.5g", peak);
    out.warnings.push_back("more than two phases: further histogram peaks at grey " + peaks +
                           "; check that the levels are those of air and of the part's material");
  }
  if (out.contrast_to_noise < 5) {
    out.warnings.push_back(
        sentence("contrast-to-noise is only %.2g: single voxels cross the threshold by noise alone",
                 out.contrast_to_noise));
  }
}

}  // namespace

GreyLevels find_grey_levels(const VolumeSource& source, const FieldOfView& field, const GreySpec& given,
                            const RunControl& control) {
  control.step("grey levels", 0);
  GreyLevels out;
  out.histogram = count_greys(source, field, control);
  if (is_constant(out.histogram)) refuse("every voxel has the same grey value; the volume holds no scan");
  control.step("grey levels", 0.4);
  const SampleWindows windows(source);
  const double first_noise = std::max(commonest_deviation(source, windows, field), 0.0);
  const bool integers = source.voxel_type() != VoxelType::f32;
  HistogramShape shape = find_modes(out.histogram, first_noise, integers);
  if (shape.modes.size() < 2 && !(given.air && given.material)) {
    // Noise may bridge the valley between the phases; means over small blocks have a fifth of it.
    const HistogramShape calm =
        find_modes(block_means(source, windows, field), block_mean_noise * first_noise, false);
    if (calm.modes.size() >= 2) shape.modes = calm.modes;
  }
  choose_modes(shape, first_noise, given, out);
  out.threshold = 0.5 * (out.air + out.material);
  control.step("grey levels", 0.6);
  measure_noise(source, windows, field, first_noise, given, out);
  find_other_phases(source, windows, field, shape, first_noise, out);
  control.step("grey levels", 0.8);
  measure_blur(source, windows, field, out);
  const double level_uncertainty = correct_by_walls(source, windows, field, given, out);
  if (!out.blur_measured) {
    out.warnings.push_back(sentence("no sound edge was found to measure the blur on; %.2g voxel is assumed",
                                    assumed_blur_voxel));
  }
  out.threshold_standard_uncertainty =
      std::hypot(0.5 * mode_scatter * std::hypot(out.air_noise, out.material_noise) + 0.001 * out.contrast(),
                 0.5 * level_uncertainty);
  say_what_looks_wrong(shape, out);
  control.step("grey levels", 1);
  return out;
}

}  // namespace halfmark
