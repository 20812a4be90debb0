// A volume held in memory.
#pragma once

#include <cstring>
#include <vector>

#include "io/volume_source.h"

namespace halfmark {

class MemoryVolume : public VolumeSource {
 public:
  MemoryVolume(const VolumeGeometry& geometry, VoxelType type)
      : geometry_(geometry),
        type_(type),
        bytes_(static_cast<std::size_t>(geometry.voxel_count()) * bytes_per_voxel(type)) {}

  const VolumeGeometry& geometry() const override { return geometry_; }
  VoxelType voxel_type() const override { return type_; }
  const std::byte* resident() const override { return bytes_.data(); }
  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    const std::size_t plane = static_cast<std::size_t>(geometry_.voxels_per_plane()) * bytes_per_voxel(type_);
    std::memcpy(out, bytes_.data() + plane * static_cast<std::size_t>(z_begin),
                plane * static_cast<std::size_t>(z_end - z_begin));
  }
  std::byte* data() { return bytes_.data(); }
  template <class T>
  T* voxels() {
    return reinterpret_cast<T*>(bytes_.data());
  }
  template <class T>
  const T* voxels() const {
    return reinterpret_cast<const T*>(bytes_.data());
  }

 private:
  VolumeGeometry geometry_;
  VoxelType type_;
  std::vector<std::byte> bytes_;
};

}  // namespace halfmark
