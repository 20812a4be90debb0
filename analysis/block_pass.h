// Visits a volume in blocks, layer by layer: one layer's planes are in memory at a time, its blocks run in
// parallel.
#pragma once

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cstdint>
#include <functional>
#include <vector>

#include "analysis/grey_deficit.h"
#include "analysis/voxel_rows.h"
#include "io/run_control.h"

namespace halfmark {

struct BlockSizes {
  static constexpr std::int64_t x = 64, y = 48, z = 48;
};

struct BlockGrid {
  explicit BlockGrid(const std::array<std::int64_t, 3>& volume) : size(volume) {
    count = {(size[0] + BlockSizes::x - 1) / BlockSizes::x, (size[1] + BlockSizes::y - 1) / BlockSizes::y,
             (size[2] + BlockSizes::z - 1) / BlockSizes::z};
  }
  std::int64_t per_layer() const { return count[0] * count[1]; }
  // Block b of a layer: x fastest.
  VoxelBox box(std::int64_t layer, std::int64_t b) const {
    const std::int64_t bx = b % count[0], by = b / count[0];
    return {{bx * BlockSizes::x, by * BlockSizes::y, layer * BlockSizes::z},
            {std::min(size[0], (bx + 1) * BlockSizes::x), std::min(size[1], (by + 1) * BlockSizes::y),
             std::min(size[2], (layer + 1) * BlockSizes::z)}};
  }
  std::array<std::int64_t, 3> size{}, count{};
};

// Calls work(layer, block, box, planes) for every block, with planes that reach `halo` voxels beyond the
// layer; after each layer done(layer), on one thread.
template <class Work, class Done>
void for_blocks(const VolumeSource& source, std::int64_t halo, const RunControl& control, Work&& work,
                Done&& done) {
  const BlockGrid grid(source.geometry().size);
  SlabReader reader(source);
  for (std::int64_t layer = 0; layer < grid.count[2]; ++layer) {
    control.throw_if_cancelled();
    GreyPlanes planes;
    planes.z_begin = std::max<std::int64_t>(0, layer * BlockSizes::z - halo);
    planes.z_end = std::min(grid.size[2], (layer + 1) * BlockSizes::z + halo);
    visit_voxel_type(source.voxel_type(), [&](auto* type) {
      planes.voxels = reinterpret_cast<const std::byte*>(
          reader.planes<std::remove_pointer_t<decltype(type)>>(planes.z_begin, planes.z_end));
    });
    tbb::parallel_for(std::int64_t{0}, grid.per_layer(), [&](std::int64_t b) {
      if (!control.cancelled()) work(layer, b, grid.box(layer, b), planes);
    });
    control.throw_if_cancelled();
    done(layer);
  }
}

}  // namespace halfmark
