// A volume as the analysis sees it: geometry and planes of voxels in their own type. It may lie in memory, in
// a file or be rendered on demand; the analysis cannot tell. Next: volume_open.h (files), memory_volume.h
// (memory), analysis/analytic_volume.h (rendered on demand).
#pragma once

#include <cstddef>
#include <cstdint>

#include "io/volume_geometry.h"

namespace halfmark {

enum class VoxelType { u8, i8, u16, i16, f32 };

constexpr std::size_t bytes_per_voxel(VoxelType t) {
  return t == VoxelType::f32 ? 4 : (t == VoxelType::u16 || t == VoxelType::i16) ? 2 : 1;
}

class VolumeSource {
 public:
  virtual ~VolumeSource() = default;
  virtual const VolumeGeometry& geometry() const = 0;
  virtual VoxelType voxel_type() const = 0;

  // Writes the voxels of planes [z_begin, z_end), x fastest, in the machine's byte order, to `out`
  // (voxels_per_plane * (z_end - z_begin) * bytes_per_voxel bytes). Safe to call from several threads at
  // once. Throws Problem (io_error, bad_data) naming file and plane.
  virtual void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const = 0;

  // The whole volume where it lies in memory in the machine's byte order (also a mapped file), else null.
  virtual const std::byte* resident() const { return nullptr; }
};

// Calls f with a null pointer of the voxel's C++ type: visit_voxel_type(t, [&](auto* p) { using T = ... }).
template <class F>
decltype(auto) visit_voxel_type(VoxelType t, F&& f) {
  switch (t) {
    case VoxelType::u8:
      return f(static_cast<std::uint8_t*>(nullptr));
    case VoxelType::i8:
      return f(static_cast<std::int8_t*>(nullptr));
    case VoxelType::u16:
      return f(static_cast<std::uint16_t*>(nullptr));
    case VoxelType::i16:
      return f(static_cast<std::int16_t*>(nullptr));
    case VoxelType::f32:
      break;
  }
  return f(static_cast<float*>(nullptr));
}

}  // namespace halfmark
