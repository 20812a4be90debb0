#include "analysis/histogram.h"

#include <tbb/enumerable_thread_specific.h>
#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <type_traits>

#include "analysis/voxel_rows.h"

namespace halfmark {

namespace {

constexpr std::int64_t slab_planes = 8;
constexpr std::int64_t float_bins = 65536;

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

template <class T>
Histogram count_integers(const VolumeSource& source, const FieldOfView& field, const RunControl& control) {
  constexpr std::int64_t low = std::numeric_limits<T>::lowest();
  constexpr std::size_t bins = std::size_t{1} << (8 * sizeof(T));
  // Four counters a value: runs of one grey value would otherwise wait for the same memory cell.
  using Counters = std::vector<std::uint32_t>;
  tbb::enumerable_thread_specific<Counters> quick([&] { return Counters(4 * bins, 0); });
  for_rows<T>(source, field, control,
              [&](const T* row, std::int64_t, std::int64_t, std::int32_t begin, std::int32_t end) {
                std::uint32_t* counts = quick.local().data();
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
  for (const Counters& counts : quick) {
    for (std::size_t i = 0; i < counts.size(); ++i) out.counts[i % bins] += counts[i];
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
  out.first_grey = range.least;
  const double width =
      (static_cast<double>(range.greatest) - static_cast<double>(range.least)) / (float_bins - 1);
  out.bin_width = width > 0 ? width : 1;
  tbb::enumerable_thread_specific<std::vector<std::int64_t>> counters(
      [] { return std::vector<std::int64_t>(float_bins, 0); });
  const double scale = 1 / out.bin_width, first = out.first_grey;
  for_rows<float>(source, field, control,
                  [&](const float* row, std::int64_t, std::int64_t, std::int32_t begin, std::int32_t end) {
                    std::int64_t* counts = counters.local().data();
                    for (std::int32_t x = begin; x < end; ++x) {
                      const auto bin =
                          static_cast<std::int64_t>((static_cast<double>(row[x]) - first) * scale + 0.5);
                      ++counts[std::clamp<std::int64_t>(bin, 0, float_bins - 1)];
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
