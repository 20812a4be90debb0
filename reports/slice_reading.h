// Pieces of slices along the voxel axes, read in one sweep over the planes that any of them needs: a volume
// may be larger than memory.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/run_mask.h"
#include "io/run_control.h"
#include "io/volume_source.h"

namespace halfmark {

// The slice lies across `axis` at voxel `index`. Its u and v axes are the other two in rising order: (y, z),
// (x, z) or (x, y).
struct SliceWindow {
  int axis = 2;
  std::int64_t index = 0;
  std::array<std::int64_t, 2> begin{0, 0},
      end{0, 0};          // voxels along u and v, end exclusive, within the volume
  std::int64_t step = 1;  // every step-th voxel along u and v

  int u_axis() const { return axis == 0 ? 1 : 0; }
  int v_axis() const { return axis == 2 ? 1 : 2; }
  std::int64_t width() const { return (end[0] - begin[0] + step - 1) / step; }
  std::int64_t height() const { return (end[1] - begin[1] + step - 1) / step; }
};

struct GreySlice {
  SliceWindow window;
  std::vector<float> grey;  // width x height, u fastest
  float at(std::int64_t u, std::int64_t v) const {
    return grey[static_cast<std::size_t>(v * window.width() + u)];
  }
};

// Throws what the source throws, and Problem(interrupted).
std::vector<GreySlice> read_slices(const VolumeSource& source, const std::vector<SliceWindow>& windows,
                                   const RunControl& control = {});
// Labels of the window's voxels, 0 where there is none.
std::vector<std::int32_t> label_slice(const RunLabels& labels, const SliceWindow& window);

}  // namespace halfmark
