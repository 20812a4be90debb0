// Run masks and labels for tests, from functions of the voxel, and pores made of them.
#pragma once

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <numbers>
#include <vector>

#include "analysis/pore_segmentation.h"
#include "analysis/run_mask.h"
#include "io/volume_geometry.h"

namespace halfmark::tests {

inline RunMask full_mask(const std::array<std::int64_t, 3>& size) {
  RunMask mask(size);
  for (std::int64_t r = 0; r < size[1] * size[2]; ++r) {
    mask.add_run({0, static_cast<std::int32_t>(size[0])});
    mask.end_row();
  }
  return mask;
}

// label(x, y, z) -> 0 or a label.
template <class F>
RunLabels labels_of(const std::array<std::int64_t, 3>& size, F label) {
  RunLabels out(size);
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      LabelRun open{0, 0, 0};
      for (std::int64_t x = 0; x <= size[0]; ++x) {
        const std::int32_t l = x < size[0] ? static_cast<std::int32_t>(label(x, y, z)) : 0;
        if (l == open.label) continue;
        open.end = static_cast<std::int32_t>(x);
        if (open.label > 0) out.add_run(open);
        open = {static_cast<std::int32_t>(x), 0, l};
      }
      out.end_row();
    }
  }
  return out;
}

// inside(x, y, z) -> bool.
template <class F>
RunMask mask_of(const std::array<std::int64_t, 3>& size, F inside) {
  const RunLabels labels = labels_of(size, [&](auto x, auto y, auto z) { return inside(x, y, z) ? 1 : 0; });
  RunMask out(size);
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (const LabelRun& r : labels.row(y, z)) out.add_run({r.begin, r.end});
      out.end_row();
    }
  }
  return out;
}

// Pores as label voxels counted whole, as a plain threshold gives them: kind closed, volume of the label.
inline SegmentedPores pores_of(const RunLabels& labels, const VolumeGeometry& geometry) {
  SegmentedPores found;
  std::int32_t count = 0;
  for (const LabelRun& r : labels.runs()) count = std::max(count, r.label);
  found.pores.resize(static_cast<std::size_t>(count));
  for (const LabelRun& r : labels.runs())
    found.pores[static_cast<std::size_t>(r.label) - 1].voxels += r.end - r.begin;
  for (std::int32_t i = 0; i < count; ++i) {
    Pore& pore = found.pores[static_cast<std::size_t>(i)];
    pore.id = i + 1;
    pore.volume_mm3.value = static_cast<double>(pore.voxels) * geometry.voxel_volume_mm3();
    pore.equivalent_diameter_mm = std::cbrt(6 * pore.volume_mm3.value / std::numbers::pi);
  }
  found.field.labels = labels;
  found.field.windows = labels;
  found.field.fraction.assign(static_cast<std::size_t>(labels.voxel_count()), PoreField::unit);
  return found;
}

}  // namespace halfmark::tests
