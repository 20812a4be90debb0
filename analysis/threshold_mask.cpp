#include "analysis/threshold_mask.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <type_traits>

#include "analysis/mask_morphology.h"
#include "analysis/voxel_rows.h"

namespace halfmark {

namespace {

constexpr std::int64_t slab_planes = 8;

// The smallest value of T that is >= threshold: comparing in the voxel's own type keeps the loop narrow.
template <class T>
T lowest_at_or_above(double threshold) {
  if constexpr (std::is_floating_point_v<T>) {
    const T t = static_cast<T>(threshold);
    return static_cast<double>(t) < threshold ? std::nextafter(t, std::numeric_limits<T>::infinity()) : t;
  } else {
    const double t = std::ceil(threshold);
    return static_cast<T>(std::clamp(t, static_cast<double>(std::numeric_limits<T>::lowest()),
                                     static_cast<double>(std::numeric_limits<T>::max())));
  }
}

template <class T>
bool nothing_reaches(double threshold) {
  return !std::is_floating_point_v<T> && threshold > static_cast<double>(std::numeric_limits<T>::max());
}

template <class T>
RunMask slab_mask(const VolumeSource& source, double threshold, std::int64_t z_begin, std::int64_t z_end) {
  const auto& size = source.geometry().size;
  const T lowest = lowest_at_or_above<T>(threshold);
  const bool none = nothing_reaches<T>(threshold);
  SlabReader reader(source);
  const T* row = reader.planes<T>(z_begin, z_end);
  RunMask mask({size[0], size[1], z_end - z_begin});
  std::vector<std::uint8_t> flags(static_cast<std::size_t>(size[0]), 0);
  for (std::int64_t r = 0; r < size[1] * (z_end - z_begin); ++r, row += size[0]) {
    if (!none) {
      for (std::int64_t x = 0; x < size[0]; ++x) flags[static_cast<std::size_t>(x)] = row[x] >= lowest;
    }
    add_row_of_flags(mask, flags.data(), size[0]);
  }
  return mask;
}

}  // namespace

RunMask voxels_at_or_above(const VolumeSource& source, const FieldOfView& field, double threshold,
                           const RunControl& control) {
  const auto& size = source.geometry().size;
  const std::int64_t slabs = (size[2] + slab_planes - 1) / slab_planes;
  std::vector<RunMask> parts(static_cast<std::size_t>(slabs));
  tbb::parallel_for(std::int64_t{0}, slabs, [&](std::int64_t s) {
    if (control.cancelled()) return;
    const std::int64_t begin = s * slab_planes, end = std::min(begin + slab_planes, size[2]);
    parts[static_cast<std::size_t>(s)] = visit_voxel_type(source.voxel_type(), [&](auto* type) {
      return slab_mask<std::remove_pointer_t<decltype(type)>>(source, threshold, begin, end);
    });
  });
  control.throw_if_cancelled();
  RunMask mask(size);
  for (const RunMask& part : parts) mask.append(part);
  return field.whole() ? mask : intersection(mask, field.rows);
}

}  // namespace halfmark
