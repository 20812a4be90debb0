#include "analysis/histogram.h"

#include <tbb/enumerable_thread_specific.h>
#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <type_traits>
#include <utility>
#include <vector>

#include "analysis/voxel_rows.h"

namespace halfmark {

namespace {

constexpr std::int64_t slab_planes = 8;
constexpr std::int64_t float_bins = 65536;
// 32-bit counters are emptied before they can overflow.
constexpr std::int64_t most_between_empties = std::int64_t{1} << 30;
// One float in so many tells the span of the bulk: what all but this share of them holds, and as much again
// on either side. A dead pixel's huge value would otherwise put everything else into one bin.
constexpr std::int64_t span_stride = 61;
constexpr double span_tail_share = 1e-3;
constexpr double span_margin = 1;

struct FloatRange {
  float least = std::numeric_limits<float>::infinity(), greatest = -std::numeric_limits<float>::infinity();
  std::int64_t not_finite = 0;
  std::int64_t first_bad = std::numeric_limits<std::int64_t>::max();  // voxel number
};

// Calls f(row, y, z, begin, end) for every row of the field, slabs in parallel.
template <class T, class F>
void for_rows(const VolumeSource& source, const FieldOfView& field, const RunControl& control, F&& f) {
  const auto& size = source.geometry().size;
  const std::int64_t slabs = (size[2] + slab_planes - 1) / slab_planes;
  tbb::parallel_for(std::int64_t{0}, slabs, [&](std::int64_t s) {
    if (control.cancelled()) return;
    const std::int64_t begin = s * slab_planes, end = std::min(begin + slab_planes, size[2]);
    SlabReader reader(source);
    const T* voxels = reader.planes<T>(begin, end);
    for (std::int64_t z = begin; z < end; ++z) {
      for (std::int64_t y = 0; y < size[1]; ++y) {
        const T* row = voxels + ((z - begin) * size[1] + y) * size[0];
        for (const Run& run : field.rows.row(y, z)) f(row, y, z, run.begin, run.end);
      }
    }
  });
  control.throw_if_cancelled();
}

struct GreyCounters {
  explicit GreyCounters(std::size_t bins) : quick(4 * bins, 0), sum(bins, 0) {}
  void empty() {
    for (std::size_t i = 0; i < quick.size(); ++i) sum[i % sum.size()] += quick[i];
    std::fill(quick.begin(), quick.end(), 0);
    since_emptied = 0;
  }
  // Four counters a value: runs of one grey value would otherwise wait for the same memory cell.
  std::vector<std::uint32_t> quick;
  std::vector<std::int64_t> sum;
  std::int64_t since_emptied = 0;  // voxels
};

template <class T>
Histogram count_integers(const VolumeSource& source, const FieldOfView& field, const RunControl& control) {
  constexpr std::int64_t low = std::numeric_limits<T>::lowest();
  constexpr std::size_t bins = std::size_t{1} << (8 * sizeof(T));
  tbb::enumerable_thread_specific<GreyCounters> counters([] { return GreyCounters(bins); });
  for_rows<T>(source, field, control,
              [&](const T* row, std::int64_t, std::int64_t, std::int32_t begin, std::int32_t end) {
                GreyCounters& mine = counters.local();
                if (mine.since_emptied > most_between_empties) mine.empty();
                mine.since_emptied += end - begin;
                std::uint32_t* counts = mine.quick.data();
                std::int32_t x = begin;
                for (; x + 4 <= end; x += 4) {
                  ++counts[static_cast<std::size_t>(row[x] - low)];
                  ++counts[bins + static_cast<std::size_t>(row[x + 1] - low)];
                  ++counts[2 * bins + static_cast<std::size_t>(row[x + 2] - low)];
                  ++counts[3 * bins + static_cast<std::size_t>(row[x + 3] - low)];
                }
                for (; x < end; ++x) ++counts[static_cast<std::size_t>(row[x] - low)];
              });
  Histogram out;
  out.first_grey = static_cast<double>(low);
  out.counts.assign(bins, 0);
  for (GreyCounters& mine : counters) {
    mine.empty();
    for (std::size_t i = 0; i < bins; ++i) out.counts[i] += mine.sum[i];
  }
  return out;
}

FloatRange range_of(const VolumeSource& source, const FieldOfView& field, const RunControl& control) {
  tbb::enumerable_thread_specific<FloatRange> ranges;
  const auto& size = source.geometry().size;
  for_rows<float>(
      source, field, control,
      [&](const float* row, std::int64_t y, std::int64_t z, std::int32_t begin, std::int32_t end) {
        FloatRange& range = ranges.local();
        for (std::int32_t x = begin; x < end; ++x) {
          if (!std::isfinite(row[x])) {
            ++range.not_finite;
            range.first_bad = std::min(range.first_bad, (z * size[1] + y) * size[0] + x);
            continue;
          }
          range.least = std::min(range.least, row[x]);
          range.greatest = std::max(range.greatest, row[x]);
        }
      });
  FloatRange out;
  for (const FloatRange& range : ranges) {
    out.least = std::min(out.least, range.least);
    out.greatest = std::max(out.greatest, range.greatest);
    out.not_finite += range.not_finite;
    out.first_bad = std::min(out.first_bad, range.first_bad);
  }
  return out;
}

std::pair<double, double> span_of_bulk(const VolumeSource& source, const FieldOfView& field,
                                       const RunControl& control, const FloatRange& range) {
  const auto& size = source.geometry().size;
  std::vector<std::vector<float>> of_slab(
      static_cast<std::size_t>((size[2] + slab_planes - 1) / slab_planes));
  for_rows<float>(
      source, field, control,
      [&](const float* row, std::int64_t y, std::int64_t z, std::int32_t begin, std::int32_t end) {
        auto& sample = of_slab[static_cast<std::size_t>(z / slab_planes)];
        for (std::int64_t x = begin + (7 * y + 3 * z) % span_stride; x < end; x += span_stride)
          sample.push_back(row[x]);
      });
  std::vector<float> sample;
  for (const auto& some : of_slab) sample.insert(sample.end(), some.begin(), some.end());
  const double least = static_cast<double>(range.least), greatest = static_cast<double>(range.greatest);
  if (static_cast<double>(sample.size()) * span_tail_share < 2) return {least, greatest};
  const auto tail = static_cast<std::ptrdiff_t>(span_tail_share * static_cast<double>(sample.size()));
  std::nth_element(sample.begin(), sample.begin() + tail, sample.end());
  const double low = static_cast<double>(sample[static_cast<std::size_t>(tail)]);
  std::nth_element(sample.begin(), sample.end() - 1 - tail, sample.end());
  const double high = static_cast<double>(*(sample.end() - 1 - tail));
  if (!(high > low)) return {least, greatest};
  const double margin = span_margin * (high - low);
  return {std::max(least, low - margin), std::min(greatest, high + margin)};
}

Histogram count_floats(const VolumeSource& source, const FieldOfView& field, const RunControl& control) {
  const FloatRange range = range_of(source, field, control);
  if (range.not_finite > 0) {
    const auto& size = source.geometry().size;
    const std::int64_t x = range.first_bad % size[0], y = range.first_bad / size[0] % size[1],
                       z = range.first_bad / (size[0] * size[1]);
    throw Problem(ExitStatus::bad_data, "grey levels: " + std::to_string(range.not_finite) +
                                            " voxels are NaN or infinite, the first at (" +
                                            std::to_string(x) + ", " + std::to_string(y) + ", " +
                                            std::to_string(z) +
                                            "); export the volume again with finite grey values");
  }
  Histogram out;
  out.counts.assign(float_bins, 0);
  const auto [low, high] = span_of_bulk(source, field, control, range);
  out.first_grey = low;
  const double width = (high - low) / (float_bins - 1);
  out.bin_width = width > 0 ? width : 1;
  tbb::enumerable_thread_specific<std::vector<std::int64_t>> counters(
      [] { return std::vector<std::int64_t>(float_bins, 0); });
  const double scale = 1 / out.bin_width, first = out.first_grey;
  for_rows<float>(source, field, control,
                  [&](const float* row, std::int64_t, std::int64_t, std::int32_t begin, std::int32_t end) {
                    std::int64_t* counts = counters.local().data();
                    for (std::int32_t x = begin; x < end; ++x) {
                      const double bin = (static_cast<double>(row[x]) - first) * scale + 0.5;
                      ++counts[static_cast<std::int64_t>(std::clamp(bin, 0.0, float_bins - 1.0))];
                    }
                  });
  for (const auto& counts : counters) {
    for (std::size_t i = 0; i < counts.size(); ++i) out.counts[i] += counts[i];
  }
  return out;
}

}  // namespace

Histogram count_greys(const VolumeSource& source, const FieldOfView& field, const RunControl& control) {
  return visit_voxel_type(source.voxel_type(), [&](auto* type) {
    using T = std::remove_pointer_t<decltype(type)>;
    if constexpr (std::is_floating_point_v<T>) {
      return count_floats(source, field, control);
    } else {
      return count_integers<T>(source, field, control);
    }
  });
}

}  // namespace halfmark
