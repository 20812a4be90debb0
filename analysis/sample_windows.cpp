#include "analysis/sample_windows.h"

#include <algorithm>

namespace halfmark {

namespace {

// Slabs of this many planes, this many of them: enough for edges and homogeneous blocks, little to read.
constexpr std::int64_t slab_planes = 32;
constexpr std::int64_t slab_count = 6;

}  // namespace

SampleWindows::SampleWindows(const VolumeSource& source) {
  const VolumeGeometry& geometry = source.geometry();
  const std::int64_t planes = geometry.size[2];
  if (const std::byte* all = source.resident()) {
    windows_.push_back({0, planes, all});
    return;
  }
  const std::size_t plane =
      static_cast<std::size_t>(geometry.voxels_per_plane()) * bytes_per_voxel(source.voxel_type());
  const std::int64_t count = planes <= slab_planes * slab_count ? 1 : slab_count;
  for (std::int64_t i = 0; i < count; ++i) {
    const std::int64_t height = count == 1 ? planes : slab_planes;
    const std::int64_t begin = count == 1 ? 0 : (planes - height) * (2 * i + 1) / (2 * count);
    read_.emplace_back(plane * static_cast<std::size_t>(height));
    source.read_planes(begin, begin + height, read_.back().data());
    windows_.push_back({begin, begin + height, read_.back().data()});
  }
}

}  // namespace halfmark
