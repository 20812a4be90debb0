#include "analysis/noise_estimate.h"

#include <algorithm>
#include <cmath>
#include <iterator>
#include <type_traits>
#include <vector>

namespace halfmark {

namespace {

// Blocks looked at, at most.
constexpr double most_blocks = 6000;
constexpr double most_means = 400000;
constexpr std::int64_t mean_bins = 4096;
// Enough blocks for a median good to about one percent.
constexpr std::size_t enough_blocks = 30;
// Deviations of blocks of 27 voxels of one noise scatter by 14 %: a third of them lies within 12 %. Edges in
// blocks of a volume without noise scatter far more.
constexpr double tight_share = 0.3;

struct BlockNoise {
  double variance = 0, mean = 0;
  std::array<double, 3> lag{0, 0, 0};  // covariance at lag 1
};

// Residuals of an n-cubed block around a centre after a least-squares linear trend.
template <class View>
BlockNoise block_noise(const View& view, std::int64_t cx, std::int64_t cy, std::int64_t cz, std::int64_t half,
                       std::vector<double>& r) {
  const std::int64_t n = 2 * half + 1;
  r.resize(static_cast<std::size_t>(n * n * n));
  double sum = 0;
  Vec3 slope{0, 0, 0};
  double moment = 0;
  std::size_t i = 0;
  for (std::int64_t z = -half; z <= half; ++z) {
    for (std::int64_t y = -half; y <= half; ++y) {
      for (std::int64_t x = -half; x <= half; ++x, ++i) {
        const double g = view(cx + x, cy + y, cz + z);
        r[i] = g;
        sum += g;
        slope = slope + g * Vec3{static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)};
        moment += static_cast<double>(x * x);
      }
    }
  }
  const double count = static_cast<double>(n * n * n), mean = sum / count;
  slope = (1 / moment) * slope;
  i = 0;
  BlockNoise out;
  out.mean = mean;
  for (std::int64_t z = -half; z <= half; ++z) {
    for (std::int64_t y = -half; y <= half; ++y) {
      for (std::int64_t x = -half; x <= half; ++x, ++i) {
        r[i] -= mean + slope[0] * static_cast<double>(x) + slope[1] * static_cast<double>(y) +
                slope[2] * static_cast<double>(z);
        out.variance += r[i] * r[i];
      }
    }
  }
  out.variance /= count - 4;
  const std::array<std::int64_t, 3> stride{1, n, n * n};
  for (std::size_t a = 0; a < 3; ++a) {
    double products = 0;
    for (std::size_t k = 0; k < r.size(); ++k) {
      const auto at = static_cast<std::int64_t>(k) / stride[a] % n;
      if (at + 1 < n) products += r[k] * r[k + static_cast<std::size_t>(stride[a])];
    }
    // Removing the trend takes about 1 / count of correlation from every pair.
    out.lag[a] =
        products / (count / static_cast<double>(n) * static_cast<double>(n - 1)) + out.variance / count;
  }
  return out;
}

template <class View>
bool surroundings_between(const View& view, std::int64_t cx, std::int64_t cy, std::int64_t cz,
                          std::int64_t half, double low, double high) {
  for (std::int64_t z = cz - half; z <= cz + half; ++z) {
    for (std::int64_t y = cy - half; y <= cy + half; ++y) {
      for (std::int64_t x = cx - half; x <= cx + half; ++x) {
        const double g = view(x, y, z);
        if (!(g > low && g < high)) return false;
      }
    }
  }
  return true;
}

double median(std::vector<double> values) {
  auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

// Mean of the middle eight tenths.
double middle_mean(std::vector<double> values) {
  std::sort(values.begin(), values.end());
  const std::size_t cut = values.size() / 10;
  double sum = 0;
  for (std::size_t i = cut; i < values.size() - cut; ++i) sum += values[i];
  return sum / static_cast<double>(values.size() - 2 * cut);
}

// Calls f(view, x, y, z) at places on a regular grid that lie in the field with a margin.
template <class F>
void for_places(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field,
                std::int64_t margin, double most_places, F&& f) {
  const auto& size = source.geometry().size;
  double volume = 0;
  for (const auto& w : windows.windows())
    volume += static_cast<double>(w.z_end - w.z_begin) * static_cast<double>(size[0] * size[1]);
  const auto step = std::max<std::int64_t>(3, static_cast<std::int64_t>(std::cbrt(volume / most_places)));
  visit_voxel_type(source.voxel_type(), [&](auto* type) {
    using T = std::remove_pointer_t<decltype(type)>;
    for (const auto& window : windows.windows()) {
      const WindowView<T> view(window, size);
      for (std::int64_t z = window.z_begin + margin; z + margin < window.z_end; z += step) {
        for (std::int64_t y = margin; y + margin < size[1]; y += step) {
          for (std::int64_t x = margin; x + margin < size[0]; x += step) {
            if (cube_in_field(field, x, y, z, margin)) f(view, x, y, z);
          }
        }
      }
    }
  });
}

// The middle of the shortest interval that holds a third of the values, which lies around their mode, and its
// width.
struct Commonest {
  double value = 0, width = 0;
};

Commonest commonest_of(std::vector<double> values) {
  if (values.empty()) return {};
  std::sort(values.begin(), values.end());
  const std::size_t third = std::max<std::size_t>(1, values.size() / 3);
  std::size_t best = 0;
  for (std::size_t i = 0; i + third < values.size(); ++i) {
    if (values[i + third] - values[i] < values[best + third] - values[best]) best = i;
  }
  return {values[std::min(best + third / 2, values.size() - 1)],
          values[std::min(best + third, values.size() - 1)] - values[best]};
}

}  // namespace

NoiseEstimate estimate_noise(const VolumeSource& source, const SampleWindows& windows,
                             const FieldOfView& field, double low, double high) {
  NoiseEstimate out;
  // Large blocks with clear voxels around; smaller ones where the phase is thin.
  for (const auto& [half, clear] :
       {std::pair<std::int64_t, std::int64_t>{5, 5}, {3, 5}, {3, 3}, {2, 3}, {2, 2}, {1, 2}, {1, 1}}) {
    std::vector<double> variances, means;
    std::array<std::vector<double>, 3> lags;
    std::vector<double> r;
    const std::int64_t margin = half + clear;
    for_places(source, windows, field, margin, most_blocks,
               [&](const auto& view, std::int64_t x, std::int64_t y, std::int64_t z) {
                 if (!surroundings_between(view, x, y, z, margin, low, high)) return;
                 const BlockNoise block = block_noise(view, x, y, z, half, r);
                 variances.push_back(block.variance);
                 means.push_back(block.mean);
                 for (std::size_t a = 0; a < 3; ++a) lags[a].push_back(block.lag[a]);
               });
    if (variances.size() < enough_blocks && half + clear > 2) continue;
    if (variances.empty()) return out;
    // The median of a chi-square variable with k degrees of freedom is about k (1 - 2 / (9 k))^3.
    const double freedom = static_cast<double>((2 * half + 1) * (2 * half + 1) * (2 * half + 1) - 4);
    const double variance = median(variances) / std::pow(1 - 2 / (9 * freedom), 3);
    out.deviation = std::sqrt(variance);
    out.level = median(means);
    out.clear_voxels = clear;
    out.blocks = static_cast<std::int64_t>(variances.size());
    for (std::size_t a = 0; a < 3 && variance > 0; ++a)
      out.correlation[a] = std::clamp(middle_mean(lags[a]) / variance, -1.0, 1.0);
    return out;
  }
  return out;
}

Histogram block_means(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field) {
  std::vector<double> means;
  for_places(source, windows, field, 1, most_means,
             [&](const auto& view, std::int64_t x, std::int64_t y, std::int64_t z) {
               double sum = 0;
               for (std::int64_t dz = -1; dz <= 1; ++dz) {
                 for (std::int64_t dy = -1; dy <= 1; ++dy) {
                   for (std::int64_t dx = -1; dx <= 1; ++dx) sum += view(x + dx, y + dy, z + dz);
                 }
               }
               means.push_back(sum / 27);
             });
  Histogram out;
  if (means.empty()) return out;
  const auto [least, greatest] = std::minmax_element(means.begin(), means.end());
  out.first_grey = *least;
  out.bin_width = std::max((*greatest - *least) / (mean_bins - 1), 1e-12);
  out.counts.assign(static_cast<std::size_t>(mean_bins), 0);
  for (const double mean : means)
    ++out.counts[static_cast<std::size_t>((mean - out.first_grey) / out.bin_width + 0.5)];
  return out;
}

double commonest_deviation(const VolumeSource& source, const SampleWindows& windows,
                           const FieldOfView& field) {
  std::vector<double> deviations, r;
  for_places(source, windows, field, 2, most_blocks,
             [&](const auto& view, std::int64_t x, std::int64_t y, std::int64_t z) {
               deviations.push_back(std::sqrt(block_noise(view, x, y, z, 1, r).variance));
             });
  // Clipped air is constant: its blocks say nothing about the noise where others do.
  std::vector<double> varying;
  std::copy_if(deviations.begin(), deviations.end(), std::back_inserter(varying),
               [](double d) { return d > 0; });
  const Commonest all = commonest_of(deviations), some = commonest_of(varying);
  const bool tight = varying.size() >= enough_blocks && some.width < tight_share * some.value;
  return all.value > 0 || !tight ? all.value : some.value;
}

}  // namespace halfmark
