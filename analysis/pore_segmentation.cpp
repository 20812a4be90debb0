#include "analysis/pore_segmentation.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <numeric>
#include <span>

#include "analysis/diffuse_porosity.h"
#include "analysis/field_border.h"
#include "analysis/grey_deficit.h"
#include "analysis/mask_morphology.h"
#include "analysis/peak_tree.h"
#include "analysis/pore_candidates.h"
#include "analysis/pore_fillings.h"
#include "analysis/pore_iso50.h"
#include "analysis/pore_uncertainty.h"
#include "analysis/pore_windows.h"

namespace halfmark {

namespace {

// A label ends at half of the peak of the smoothed deficit; three edge widths further out a blurred void has
// lost less than 0.1 % of its summed deficit (Gaussian tail), while every voxel more only adds noise and
// level error.
constexpr double window_widths = 3.0;
constexpr double ring_voxels = 2.5;
// The level model is trusted to this share of the contrast before the ring around a pore corrects it.
constexpr double level_prior_share = 0.002;
// A core of a label is this many edge widths inside it: there the grey value is the filling's own.
constexpr double core_widths = 3.0;
// Plateaus above this share are plain air: their mean is the voids' own grey level.
constexpr double plain_air_share = 0.8;
// So many core voxels make the voids' own grey level better than the air's.
constexpr std::int64_t enough_void_voxels = 200;

enum class Search { dark, bright, diffuse };
constexpr std::int32_t searches = 3;

struct Found {
  Search search = Search::dark;
  PoreCandidates candidates;
  RunLabels labels;  // grown pores of enough voxels, renumbered
  std::int32_t count = 0;
  std::vector<float> peak;  // index: label
  PoreWindows windows;
  std::vector<std::array<std::int32_t, 3>> unlisted;  // voxels of pores of fewer than min_voxels
};

// Until the final numbers are given a pore's id tells search and label.
std::int32_t interim_id(Search search, std::int32_t label) {
  return searches * label + static_cast<std::int32_t>(search);
}

// Labels as runs, without pores of fewer than min_voxels.
void labels_from(const GrownPores& grown, std::int64_t min_voxels, Found& found) {
  const RunMask& mask = found.candidates.mask;
  std::vector<std::int64_t> voxels(static_cast<std::size_t>(grown.count) + 1, 0);
  for (const std::int32_t label : grown.label) ++voxels[static_cast<std::size_t>(label)];
  std::vector<std::int32_t> number(voxels.size(), 0);
  found.peak.assign(1, 0);
  for (std::size_t l = 1; l < voxels.size(); ++l) {
    if (voxels[l] < min_voxels) continue;
    number[l] = ++found.count;
    found.peak.push_back(grown.peak[l]);
  }
  found.labels = RunLabels(mask.size());
  std::size_t at = 0;
  for (std::int64_t z = 0; z < mask.size()[2]; ++z) {
    for (std::int64_t y = 0; y < mask.size()[1]; ++y) {
      for (const Run& run : mask.row(y, z)) {
        LabelRun open{0, 0, 0};
        for (std::int32_t x = run.begin; x < run.end; ++x, ++at) {
          const std::int32_t label = number[static_cast<std::size_t>(grown.label[at])];
          if (label == 0 && grown.label[at] != 0)
            found.unlisted.push_back({x, static_cast<std::int32_t>(y), static_cast<std::int32_t>(z)});
          if (label != open.label) {
            if (open.label != 0) found.labels.add_run(open);
            open = {x, x, label};
          }
          open.end = x + 1;
        }
        if (open.label != 0) found.labels.add_run(open);
      }
      found.labels.end_row();
    }
  }
}

RunMask mask_of(const RunLabels& labels) {
  RunMask out(labels.size());
  for (std::int64_t z = 0; z < labels.size()[2]; ++z) {
    for (std::int64_t y = 0; y < labels.size()[1]; ++y) {
      Run open{0, -1};
      for (const LabelRun& run : labels.row(y, z)) {
        if (open.end == run.begin) {
          open.end = run.end;
        } else {
          if (open.end >= 0) out.add_run(open);
          open = {run.begin, run.end};
        }
      }
      if (open.end >= 0) out.add_run(open);
      out.end_row();
    }
  }
  return out;
}

Found find_signed(const VolumeSource& source, const GreyDeficit& deficit, const GreyLevels& levels,
                  const PoreSpec& options, int sign, const RunControl& control) {
  Found found;
  found.search = sign > 0 ? Search::dark : Search::bright;
  found.candidates = find_candidates(source, deficit, levels, sign, control);
  labels_from(grow_pores(found.candidates, control), options.min_voxels, found);
  control.step("pores", 0.6);
  const VolumeGeometry& geometry = source.geometry();
  const double width = edge_width_voxel(levels);
  const RunMask core = erode(mask_of(found.labels), core_widths * width * geometry.voxel_mm(),
                             geometry.spacing_mm, true, control);
  const WindowSizes sizes{window_widths * width, ring_voxels};
  found.windows = sum_windows(source, deficit, found.labels, found.count, core, sizes, sign, control);
  found.candidates.values.clear();
  return found;
}

// Regions of lowered grey as if they were pores; marks what they swallow of the pores themselves.
Found find_diffuse(const VolumeSource& source, const GreyDeficit& deficit, const GreyLevels& levels,
                   const MaterialLevel& level, Found& dark, std::vector<std::uint8_t>& swallowed,
                   const RunControl& control) {
  Found found;
  found.search = Search::diffuse;
  found.candidates.white_ratio = dark.candidates.white_ratio;
  DiffuseRegions regions = find_diffuse_regions(dark.candidates.cells, dark.windows, dark.unlisted,
                                                level.standard_uncertainty / levels.contrast(), control);
  swallowed = std::move(regions.swallowed);
  found.labels = empty_rows<RunLabels>(source.geometry().size);
  found.windows.windows = found.labels;
  found.peak = std::move(regions.peak);
  found.count = regions.count;
  if (found.count == 0) return found;
  // What a region swallows may become its own; other windows stay the pores'.
  RunLabels taken(source.geometry().size);
  for (std::int64_t z = 0; z < taken.size()[2]; ++z) {
    for (std::int64_t y = 0; y < taken.size()[1]; ++y) {
      for (const LabelRun& run : dark.windows.windows.row(y, z)) {
        if (swallowed[static_cast<std::size_t>(run.label)] == 0) taken.add_run(run);
      }
      taken.end_row();
    }
  }
  found.windows =
      sum_regions(source, deficit, dark.candidates.cells, regions.region, found.count, taken, control);
  found.labels = found.windows.windows;
  return found;
}

struct Touches {
  std::vector<std::uint8_t> open, border;
  std::vector<std::array<std::int32_t, 3>> min, max;
};

Touches touches_of(const RunLabels& labels, std::int32_t count, const PartMap& part,
                   const FieldOfView& field) {
  Touches out;
  const auto n = static_cast<std::size_t>(count) + 1;
  out.open.assign(n, 0);
  out.border.assign(n, 0);
  out.min.assign(n, {INT32_MAX, INT32_MAX, INT32_MAX});
  out.max.assign(n, {-1, -1, -1});
  for (std::int64_t z = 0; z < labels.size()[2]; ++z) {
    for (std::int64_t y = 0; y < labels.size()[1]; ++y) {
      const auto open_row = part.open_air.row(y, z);
      std::size_t j = 0;
      for (const LabelRun& run : labels.row(y, z)) {
        const auto l = static_cast<std::size_t>(run.label);
        while (j < open_row.size() && open_row[j].end <= run.begin) ++j;
        if (j < open_row.size() && open_row[j].begin < run.end) out.open[l] = 1;
        if (reaches_border({run.begin, run.end}, y, z, field.rows)) out.border[l] = 1;
        const std::array<std::int32_t, 3> first{run.begin, static_cast<std::int32_t>(y),
                                                static_cast<std::int32_t>(z)};
        const std::array<std::int32_t, 3> last{run.end - 1, first[1], first[2]};
        for (std::size_t a = 0; a < 3; ++a) {
          out.min[l][a] = std::min(out.min[l][a], first[a]);
          out.max[l][a] = std::max(out.max[l][a], last[a]);
        }
      }
    }
  }
  return out;
}

struct VolumeOfPore {
  double voxels = 0;
  double correction = 0;                    // taken off each voxel's share
  std::vector<Contribution> contributions;  // voxels
};

// Sum over the window less the ring's residual, which is trusted as far as its noise is smaller than the
// level model's own error.
VolumeOfPore volume_of(const PoreSums& s, const GreyLevels& levels, const MaterialLevel& level,
                       double white_ratio) {
  const double unit = PoreField::unit;
  const double noise2 = white_ratio / (levels.contrast_to_noise * levels.contrast_to_noise);
  const double prior = std::hypot(level_prior_share, level.standard_uncertainty / levels.contrast());
  double correction = 0, level_error = prior;
  if (s.ring_voxels > 0) {
    const double ring_variance = noise2 / static_cast<double>(s.ring_voxels);
    const double trust = prior * prior / (prior * prior + ring_variance);
    correction = trust * static_cast<double>(s.ring) / unit / static_cast<double>(s.ring_voxels);
    level_error = std::sqrt(prior * prior * ring_variance / (prior * prior + ring_variance));
  }
  const double n = static_cast<double>(s.window_voxels);
  VolumeOfPore out;
  out.correction = correction;
  out.voxels = std::max(static_cast<double>(s.window) / unit - n * correction, 0.0);
  out.contributions = {
      {"noise", std::sqrt(n * noise2)},
      {"local level", n * level_error},
      {"threshold",
       out.voxels * std::numbers::sqrt2 * levels.threshold_standard_uncertainty / levels.contrast()},
      {"edge position", edge_error_widths * edge_width_voxel(levels) * sphere_area(out.voxels)}};
  return out;
}

double void_share(const std::vector<PoreSums>& sums) {
  std::int64_t voxels = 0, sum = 0;
  for (const PoreSums& s : sums) {
    if (s.core_voxels < least_core_voxels) continue;
    if (static_cast<double>(s.core) < plain_air_share * PoreField::unit * static_cast<double>(s.core_voxels))
      continue;
    voxels += s.core_voxels;
    sum += s.core;
  }
  return voxels >= enough_void_voxels
             ? static_cast<double>(sum) / PoreField::unit / static_cast<double>(voxels)
             : 1;
}

Pore pore_from(const PoreSums& s, const VolumeOfPore& volume, double share, const VolumeGeometry& geometry) {
  Pore pore;
  pore.voxels = s.label_voxels;
  const double voxel = geometry.voxel_volume_mm3();
  pore.volume_mm3.value = volume.voxels / share * voxel;
  double variance = 0;
  for (Contribution c : volume.contributions) {
    c.standard_uncertainty *= voxel / share;
    variance += c.standard_uncertainty * c.standard_uncertainty;
    pore.volume_mm3.contributions.push_back(c);
  }
  pore.volume_mm3.standard_uncertainty = std::sqrt(variance);
  pore.equivalent_diameter_mm = std::cbrt(6 * pore.volume_mm3.value / std::numbers::pi);
  if (pore.volume_mm3.value > 0) {
    pore.diameter_standard_uncertainty_mm =
        pore.equivalent_diameter_mm * pore.volume_mm3.standard_uncertainty / (3 * pore.volume_mm3.value);
  }
  const double weight = static_cast<double>(std::max<std::int64_t>(s.weight, 1));
  pore.centre_mm = geometry.index_to_mm({static_cast<double>(s.moment[0]) / weight,
                                         static_cast<double>(s.moment[1]) / weight,
                                         static_cast<double>(s.moment[2]) / weight});
  pore.mean_grey = s.grey / static_cast<double>(std::max<std::int64_t>(s.label_voxels, 1));
  return pore;
}

PoreKind kind_of(Search search, bool in_between, const Pore& pore) {
  if (search == Search::bright) return PoreKind::inclusion;
  if (search == Search::diffuse) return PoreKind::diffuse;
  return in_between          ? PoreKind::in_between
         : pore.cut_by_field ? PoreKind::cut_by_field
         : pore.open         ? PoreKind::open
                             : PoreKind::closed;
}

// Adds the pores of one search to the result, with their interim ids.
void add_pores(const Found& found, const std::vector<std::uint8_t>& swallowed, const GreyLevels& levels,
               const MaterialLevel& level, const PartMap& part, const FieldOfView& field,
               const VolumeGeometry& geometry, double share, std::vector<Pore>& out) {
  const Touches touches = touches_of(found.labels, found.count, part, field);
  for (std::int32_t l = 1; l <= found.count; ++l) {
    const auto i = static_cast<std::size_t>(l);
    if (i < swallowed.size() && swallowed[i] != 0) continue;
    const PoreSums& s = found.windows.sums[i];
    const double plateau = plateau_of(s);
    const bool in_between =
        found.search == Search::dark &&
        is_in_between(s, static_cast<double>(found.peak[i]), levels, found.candidates.smoothed_noise);
    // Inclusions and trapped powder are sized by half of their own plateau or peak: the sum relative to it.
    double full = share;
    if (in_between) full = plateau;
    if (found.search == Search::bright)
      full = plateau > 0 ? plateau : std::max<double>(static_cast<double>(found.peak[i]), 0.05);
    Pore pore = pore_from(s, volume_of(s, levels, level, found.candidates.white_ratio), full, geometry);
    pore.id = interim_id(found.search, l);
    pore.contrast = static_cast<double>(found.peak[i]);
    pore.open = found.search == Search::dark && touches.open[i] != 0;
    pore.cut_by_field = touches.border[i] != 0;
    pore.min_index = touches.min[i];
    pore.max_index = touches.max[i];
    pore.kind = kind_of(found.search, in_between, pore);
    if (pore.volume_mm3.value > 0) out.push_back(pore);
  }
}

void sort_pores(std::vector<Pore>& pores) {
  std::stable_sort(pores.begin(), pores.end(), [](const Pore& a, const Pore& b) {
    if (a.volume_mm3.value != b.volume_mm3.value) return a.volume_mm3.value > b.volume_mm3.value;
    const std::array<std::int32_t, 3> ka{a.min_index[2], a.min_index[1], a.min_index[0]},
        kb{b.min_index[2], b.min_index[1], b.min_index[0]};
    return ka < kb;
  });
}

// What the ring around each pore takes off its voxels' shares, in 1/PoreField::unit; index: label.
std::vector<double> corrections_of(const Found& found, const GreyLevels& levels, const MaterialLevel& level) {
  std::vector<double> out;
  for (const PoreSums& s : found.windows.sums) {
    out.push_back(PoreField::unit * volume_of(s, levels, level, found.candidates.white_ratio).correction);
  }
  return out;
}

// Rows of `from` with labels replaced (0: dropped) and, where given, one value per voxel kept.
void add_renumbered(std::span<const LabelRun> row, const std::vector<std::int32_t>& number,
                    const std::vector<std::int16_t>* fraction, const std::vector<double>* correction,
                    std::size_t& at, double scale, std::vector<LabelRun>& runs,
                    std::vector<std::vector<std::int16_t>>* values) {
  for (const LabelRun& run : row) {
    const auto length = static_cast<std::size_t>(run.end - run.begin);
    const std::int32_t label = number[static_cast<std::size_t>(run.label)];
    if (label != 0) {
      runs.push_back({run.begin, run.end, label});
      if (fraction != nullptr) {
        values->emplace_back();
        for (std::size_t k = 0; k < length; ++k) {
          const double own =
              static_cast<double>((*fraction)[at + k]) - (*correction)[static_cast<std::size_t>(run.label)];
          const double scaled = own * scale;
          values->back().push_back(
              static_cast<std::int16_t>(std::lround(std::clamp(scaled, -32000.0, 32000.0))));
        }
      }
    }
    at += length;
  }
}

std::vector<std::int32_t> new_numbers(const std::vector<Pore>& pores, const Found& found) {
  std::vector<std::int32_t> number(static_cast<std::size_t>(found.count) + 1, 0);
  for (std::size_t i = 0; i < pores.size(); ++i) {
    if (pores[i].id % searches == static_cast<std::int32_t>(found.search))
      number[static_cast<std::size_t>(pores[i].id / searches)] = static_cast<std::int32_t>(i) + 1;
  }
  return number;
}

// Joins the windows and labels of all searches under the final numbers. Where a pore's and an inclusion's
// window overlap the pore keeps the voxel.
PoreField join_fields(const std::vector<Found>& found, const std::vector<std::vector<std::int32_t>>& numbers,
                      const std::vector<std::vector<double>>& corrections, double share,
                      const std::array<std::int64_t, 3>& size) {
  PoreField out;
  out.windows = RunLabels(size);
  out.labels = RunLabels(size);
  std::vector<std::size_t> at(found.size()), unused(found.size());
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      std::vector<LabelRun> runs;
      std::vector<std::vector<std::int16_t>> values;
      for (std::size_t f = 0; f < found.size(); ++f) {
        add_renumbered(found[f].windows.windows.row(y, z), numbers[f], &found[f].windows.fraction,
                       &corrections[f], at[f], 1 / share, runs, &values);
      }
      std::vector<std::size_t> order(runs.size());
      std::iota(order.begin(), order.end(), std::size_t{0});
      std::stable_sort(order.begin(), order.end(),
                       [&](std::size_t a, std::size_t b) { return runs[a].begin < runs[b].begin; });
      std::int32_t end = 0;
      for (const std::size_t i : order) {
        const std::int32_t begin = std::max(runs[i].begin, end);
        if (begin >= runs[i].end) continue;
        out.windows.add_run({begin, runs[i].end, runs[i].label});
        out.fraction.insert(out.fraction.end(), values[i].begin() + (begin - runs[i].begin), values[i].end());
        end = runs[i].end;
      }
      out.windows.end_row();
      runs.clear();
      for (std::size_t f = 0; f < found.size(); ++f)
        add_renumbered(found[f].labels.row(y, z), numbers[f], nullptr, nullptr, unused[f], 1, runs, nullptr);
      std::stable_sort(runs.begin(), runs.end(),
                       [](const LabelRun& a, const LabelRun& b) { return a.begin < b.begin; });
      for (const LabelRun& run : runs) out.labels.add_run(run);
      out.labels.end_row();
    }
  }
  return out;
}

// Peak of a ball blurred by a Gaussian of width s: erf(r / sqrt 2) - sqrt(2 / pi) r exp(-r^2 / 2), r = R / s.
double blurred_ball_peak(double radius, double width) {
  const double r = radius / width;
  return std::erf(r * std::numbers::sqrt2 / 2) - std::sqrt(2 / std::numbers::pi) * r * std::exp(-0.5 * r * r);
}

}  // namespace

SegmentedPores segment_pores(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
                             const PartMap& part, const MaterialLevel& level, const PoreSpec& options,
                             const RunControl& control) {
  if (options.method == PoreMethod::iso50)
    return segment_pores_iso50(source, field, levels, part, options, control);
  control.step("pores", 0);
  const VolumeGeometry& geometry = source.geometry();
  const GreyDeficit deficit(source, field, levels, part, level);
  std::vector<Found> found;
  found.push_back(find_signed(source, deficit, levels, options, 1, control));
  std::vector<std::uint8_t> swallowed;
  found.push_back(find_diffuse(source, deficit, levels, level, found[0], swallowed, control));
  if (options.inclusions) found.push_back(find_signed(source, deficit, levels, options, -1, control));

  SegmentedPores out;
  const Found& dark = found[0];
  const double share = void_share(dark.windows.sums);
  out.void_grey = levels.material - share * levels.contrast();
  out.smoothed_noise = dark.candidates.smoothed_noise;
  out.seed_threshold = dark.candidates.seed_threshold;
  out.kernel_voxel = dark.candidates.kernel_voxel;
  for (const Found& f : found) {
    add_pores(f, f.search == Search::dark ? swallowed : std::vector<std::uint8_t>{}, levels, level, part,
              field, geometry, share, out.pores);
  }
  sort_pores(out.pores);
  std::vector<std::vector<std::int32_t>> numbers;
  std::vector<std::vector<double>> corrections;
  for (const Found& f : found) {
    numbers.push_back(new_numbers(out.pores, f));
    corrections.push_back(corrections_of(f, levels, level));
  }
  out.field = join_fields(found, numbers, corrections, share, geometry.size);
  for (std::size_t i = 0; i < out.pores.size(); ++i) out.pores[i].id = static_cast<std::int32_t>(i) + 1;
  control.step("pores", 1);
  return out;
}

double smallest_expected_diameter_mm(const SegmentedPores& found, const GreyLevels& levels, double voxel_mm) {
  const double width =
      std::sqrt(levels.blur_voxel * levels.blur_voxel + 1.0 / 12 + found.kernel_voxel * found.kernel_voxel);
  // One-sided 90 % point of the normal distribution.
  const double wanted = found.seed_threshold + 1.2816 * found.smoothed_noise;
  double low = 0, high = 100 * width;
  for (int i = 0; i < 80; ++i) {
    const double middle = 0.5 * (low + high);
    (blurred_ball_peak(0.5 * middle, width) < wanted ? low : high) = middle;
  }
  return 0.5 * (low + high) * voxel_mm;
}

}  // namespace halfmark
