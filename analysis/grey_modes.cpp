#include "analysis/grey_modes.h"

#include <algorithm>
#include <cmath>

namespace halfmark {

namespace {

// A mode stands out from the higher of its valleys by at least this share of its height ...
constexpr double least_prominence = 0.25;
// ... and by this many standard deviations of the counts there.
constexpr double least_significance = 6;
constexpr double least_mass = 5e-4;
// Histograms are brought to about this many bins: finer ones only cost time.
constexpr std::size_t working_bins = 8192;

struct Counts {
  double first = 0, width = 1;
  std::vector<double> values;
  double grey(double bin) const { return first + bin * width; }
};

double occupied_spacing(const std::vector<std::int64_t>& counts) {
  std::int64_t first = -1, last = -1, occupied = 0;
  for (std::size_t i = 0; i < counts.size(); ++i) {
    if (counts[i] == 0) continue;
    if (first < 0) first = static_cast<std::int64_t>(i);
    last = static_cast<std::int64_t>(i);
    ++occupied;
  }
  return occupied < 2 ? 1 : static_cast<double>(last - first) / static_cast<double>(occupied - 1);
}

// A phase that lies in the type's end value altogether is a peak; what is clipped off a peak beside it is
// none. The phase is taken to lie there when the end holds this many times what its neighbours within three
// noises hold.
constexpr double whole_phase_factor = 3;

bool holds_a_phase(const std::vector<std::int64_t>& counts, bool at_low_end, double noise_bins) {
  const auto reach = std::min<std::size_t>(
      counts.size() - 1, static_cast<std::size_t>(std::max(3.0, std::ceil(3 * noise_bins))));
  double beside = 0;
  for (std::size_t k = 1; k <= reach; ++k)
    beside += static_cast<double>(at_low_end ? counts[k] : counts[counts.size() - 1 - k]);
  const double end = static_cast<double>(at_low_end ? counts.front() : counts.back());
  return end > whole_phase_factor * beside;
}

// The counts without the clipped ends, several bins joined where there are very many over little range.
Counts working_counts(const Histogram& h, bool integer_type, double noise) {
  std::size_t first = 0, last = h.counts.size() - 1;
  while (first < last && h.counts[first] == 0) ++first;
  while (last > first && h.counts[last] == 0) --last;
  std::vector<std::int64_t> counts = h.counts;
  if (integer_type && last - first > 8) {  // the ends hold what was clipped
    const double noise_bins = noise / h.bin_width;
    if (first == 0 && !holds_a_phase(h.counts, true, noise_bins)) counts[0] = 0;
    if (last + 1 == counts.size() && !holds_a_phase(h.counts, false, noise_bins)) counts[last] = 0;
  }
  const double span = static_cast<double>(last - first + 1);
  const double by_noise = std::max(1.0, noise / h.bin_width / 16);
  const auto join = static_cast<std::size_t>(std::max(1.0, std::min(by_noise, span / 64)));
  const std::size_t bins = std::min(working_bins * 8, (last - first) / join + 1);
  Counts out;
  out.width = h.bin_width * static_cast<double>(join);
  out.first = h.first_grey + h.bin_width * (static_cast<double>(first) + 0.5 * static_cast<double>(join - 1));
  out.values.assign(bins, 0);
  for (std::size_t i = first; i <= last; ++i)
    out.values[std::min((i - first) / join, bins - 1)] += static_cast<double>(counts[i]);
  return out;
}

void moving_mean(std::vector<double>& values, std::int64_t half, std::vector<double>& sums) {
  const auto n = static_cast<std::int64_t>(values.size());
  sums.assign(1, 0);
  for (const double value : values) sums.push_back(sums.back() + value);
  for (std::int64_t i = 0; i < n; ++i) {
    const std::int64_t a = std::max<std::int64_t>(0, i - half), b = std::min(n, i + half + 1);
    const double sum = sums[static_cast<std::size_t>(b)] - sums[static_cast<std::size_t>(a)];
    values[static_cast<std::size_t>(i)] = sum / static_cast<double>(2 * half + 1);
  }
}

// Three passes of a moving mean: near enough to a Gaussian of width sigma (bins).
std::vector<double> smoothed(std::vector<double> values, double sigma) {
  const auto half =
      static_cast<std::int64_t>(std::max(0.0, std::round(0.5 * (std::sqrt(4 * sigma * sigma + 1) - 1))));
  std::vector<double> sums;
  for (int pass = 0; half > 0 && pass < 3; ++pass) moving_mean(values, half, sums);
  return values;
}

// Peak place by a parabola through the logarithm of the smoothed counts over +-width bins.
double refined(const std::vector<double>& s, std::size_t peak, double width) {
  const auto w = static_cast<std::int64_t>(std::max(2.0, std::round(width)));
  double n = 0, x2 = 0, x4 = 0, y0 = 0, y1 = 0, y2 = 0;
  for (std::int64_t d = -w; d <= w; ++d) {
    const std::int64_t i = static_cast<std::int64_t>(peak) + d;
    if (i < 0 || i >= static_cast<std::int64_t>(s.size()) || s[static_cast<std::size_t>(i)] <= 0)
      return static_cast<double>(peak);
    const double x = static_cast<double>(d), y = std::log(s[static_cast<std::size_t>(i)]);
    n += 1;
    x2 += x * x;
    x4 += x * x * x * x;
    y0 += y;
    y1 += x * y;
    y2 += x * x * y;
  }
  const double slope = y1 / x2, curve = (n * y2 - x2 * y0) / (n * x4 - x2 * x2);
  if (curve >= 0) return static_cast<double>(peak);
  return static_cast<double>(peak) + std::clamp(-slope / (2 * curve), -width, width);
}

// Merges the least prominent maxima until all stand out.
std::vector<std::size_t> prominent_maxima(const std::vector<double>& s, double correlation_bins) {
  std::vector<std::size_t> maxima;
  for (std::size_t i = 0; i < s.size(); ++i) {
    const bool up = i == 0 || s[i] > s[i - 1];
    std::size_t j = i;
    while (j + 1 < s.size() && s[j + 1] == s[i]) ++j;
    const bool down = j + 1 == s.size() || s[j + 1] < s[i];
    if (up && down && s[i] > 0) maxima.push_back((i + j) / 2);
    i = j;
  }
  while (maxima.size() > 1) {
    std::size_t worst = 0;
    double least = 1e300;
    for (std::size_t k = 0; k < maxima.size(); ++k) {
      double left = 0, right = 0;
      if (k > 0)
        left = *std::min_element(s.begin() + static_cast<std::ptrdiff_t>(maxima[k - 1]),
                                 s.begin() + static_cast<std::ptrdiff_t>(maxima[k]));
      if (k + 1 < maxima.size())
        right = *std::min_element(s.begin() + static_cast<std::ptrdiff_t>(maxima[k]),
                                  s.begin() + static_cast<std::ptrdiff_t>(maxima[k + 1]));
      const double height = s[maxima[k]], drop = height - std::max(left, right);
      // Smoothed counts over m bins scatter by sqrt(count / m).
      const double scatter = std::sqrt(height / correlation_bins + 1e-9);
      const double stands_out =
          std::min(drop / (least_prominence * height), drop / (least_significance * scatter));
      if (stands_out < least) {
        least = stands_out;
        worst = k;
      }
    }
    if (least >= 1) break;
    maxima.erase(maxima.begin() + static_cast<std::ptrdiff_t>(worst));
  }
  return maxima;
}

}  // namespace

HistogramShape find_modes(const Histogram& histogram, double noise, bool integer_type) {
  HistogramShape out;
  double total = 0;
  for (const std::int64_t c : histogram.counts) total += static_cast<double>(c);
  if (total == 0) return out;
  if (integer_type) {
    out.clipped_low = static_cast<double>(histogram.counts.front()) / total;
    out.clipped_high = static_cast<double>(histogram.counts.back()) / total;
  }
  const Counts counts = working_counts(histogram, integer_type, noise);
  const double spacing =
      integer_type ? occupied_spacing(histogram.counts) * histogram.bin_width / counts.width : 1;
  const double sigma = std::max(0.5 * noise / counts.width, spacing > 1.5 ? 1.5 * spacing : 0.6);
  const std::vector<double> s = smoothed(counts.values, sigma);
  const std::vector<std::size_t> maxima = prominent_maxima(s, std::max(1.0, 3.5 * sigma));
  std::vector<std::size_t> borders{0};
  for (std::size_t k = 1; k < maxima.size(); ++k) {
    borders.push_back(
        static_cast<std::size_t>(std::min_element(s.begin() + static_cast<std::ptrdiff_t>(maxima[k - 1]),
                                                  s.begin() + static_cast<std::ptrdiff_t>(maxima[k])) -
                                 s.begin()));
  }
  borders.push_back(s.size());
  for (std::size_t k = 0; k < maxima.size(); ++k) {
    GreyMode mode;
    for (std::size_t i = borders[k]; i < borders[k + 1]; ++i) mode.mass += counts.values[i] / total;
    if (mode.mass < least_mass) continue;
    mode.height = s[maxima[k]];
    mode.valley = std::max(k > 0 ? s[borders[k]] : 0, k + 1 < maxima.size() ? s[borders[k + 1]] : 0);
    mode.grey = counts.grey(refined(s, maxima[k], std::max(2.0, noise / counts.width)));
    out.modes.push_back(mode);
  }
  return out;
}

}  // namespace halfmark
