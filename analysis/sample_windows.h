// Stretches of planes to take samples from: the whole volume where it lies in memory, else a few slabs read
// once.
#pragma once

#include <cstdint>
#include <vector>

#include "io/volume_source.h"

namespace halfmark {

class SampleWindows {
 public:
  explicit SampleWindows(const VolumeSource& source);

  struct Window {
    std::int64_t z_begin = 0, z_end = 0;
    const std::byte* voxels = nullptr;  // planes [z_begin, z_end)
  };
  const std::vector<Window>& windows() const { return windows_; }

 private:
  std::vector<std::vector<std::byte>> read_;
  std::vector<Window> windows_;
};

// Grey value access into one window in index coordinates of the volume.
template <class T>
class WindowView {
 public:
  WindowView(const SampleWindows::Window& window, const std::array<std::int64_t, 3>& size)
      : voxels_(reinterpret_cast<const T*>(window.voxels)),
        z_begin_(window.z_begin),
        z_end_(window.z_end),
        size_(size) {}
  double operator()(std::int64_t x, std::int64_t y, std::int64_t z) const {
    return static_cast<double>(voxels_[((z - z_begin_) * size_[1] + y) * size_[0] + x]);
  }
  bool holds(std::int64_t x, std::int64_t y, std::int64_t z, std::int64_t margin) const {
    return x >= margin && y >= margin && z >= z_begin_ + margin && x + margin < size_[0] &&
           y + margin < size_[1] && z + margin < z_end_;
  }
  std::int64_t z_begin() const { return z_begin_; }
  std::int64_t z_end() const { return z_end_; }
  const std::array<std::int64_t, 3>& size() const { return size_; }

 private:
  const T* voxels_;
  std::int64_t z_begin_, z_end_;
  std::array<std::int64_t, 3> size_;
};

}  // namespace halfmark
