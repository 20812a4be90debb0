// Planes of a source, one slab at a time: from memory where the volume lies there, else through a buffer.
#pragma once

#include <vector>

#include "io/volume_source.h"

namespace halfmark {

class SlabReader {
 public:
  explicit SlabReader(const VolumeSource& source) : source_(source) {}

  // The voxels of planes [z_begin, z_end), valid until the next call. T must be the source's voxel type.
  template <class T>
  const T* planes(std::int64_t z_begin, std::int64_t z_end) {
    const std::size_t plane = static_cast<std::size_t>(source_.geometry().voxels_per_plane());
    if (const std::byte* all = source_.resident()) {
      return reinterpret_cast<const T*>(all) + plane * static_cast<std::size_t>(z_begin);
    }
    buffer_.resize(plane * static_cast<std::size_t>(z_end - z_begin) * sizeof(T));
    source_.read_planes(z_begin, z_end, buffer_.data());
    return reinterpret_cast<const T*>(buffer_.data());
  }

 private:
  const VolumeSource& source_;
  std::vector<std::byte> buffer_;
};

}  // namespace halfmark
