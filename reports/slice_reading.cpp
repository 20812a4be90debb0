#include "reports/slice_reading.h"

#include <algorithm>
#include <set>

namespace halfmark {

namespace {

void add_planes(const SliceWindow& window, std::set<std::int64_t>& planes) {
  if (window.axis == 2) {
    planes.insert(window.index);
    return;
  }
  for (std::int64_t z = window.begin[1]; z < window.end[1]; z += window.step) planes.insert(z);
}

template <class T>
void take_row(const T* row, std::int64_t stride, const SliceWindow& w, std::int64_t v, GreySlice& slice) {
  float* out = slice.grey.data() + v * w.width();
  for (std::int64_t u = 0; u < w.width(); ++u)
    out[u] = static_cast<float>(row[(w.begin[0] + u * w.step) * stride]);
}

template <class T>
void take(const T* plane, std::int64_t z, std::int64_t size_x, GreySlice& slice) {
  const SliceWindow& w = slice.window;
  if (w.axis == 2) {
    if (z != w.index) return;
    for (std::int64_t v = 0; v < w.height(); ++v)
      take_row(plane + (w.begin[1] + v * w.step) * size_x, 1, w, v, slice);
    return;
  }
  if (z < w.begin[1] || z >= w.end[1] || (z - w.begin[1]) % w.step != 0) return;
  const std::int64_t v = (z - w.begin[1]) / w.step;
  if (w.axis == 1)
    take_row(plane + w.index * size_x, 1, w, v, slice);
  else
    take_row(plane + w.index, size_x, w, v, slice);
}

}  // namespace

std::vector<GreySlice> read_slices(const VolumeSource& source, const std::vector<SliceWindow>& windows,
                                   const RunControl& control) {
  std::vector<GreySlice> slices;
  std::set<std::int64_t> planes;
  for (const SliceWindow& window : windows) {
    slices.push_back(
        {window, std::vector<float>(static_cast<std::size_t>(window.width() * window.height()))});
    add_planes(window, planes);
  }
  const VolumeGeometry& g = source.geometry();
  std::vector<std::byte> buffer(static_cast<std::size_t>(g.voxels_per_plane()) *
                                bytes_per_voxel(source.voxel_type()));
  for (const std::int64_t z : planes) {
    control.throw_if_cancelled();
    source.read_planes(z, z + 1, buffer.data());
    visit_voxel_type(source.voxel_type(), [&](auto* type) {
      using T = std::remove_pointer_t<decltype(type)>;
      for (GreySlice& slice : slices) take(reinterpret_cast<const T*>(buffer.data()), z, g.size[0], slice);
    });
  }
  return slices;
}

std::vector<std::int32_t> label_slice(const RunLabels& labels, const SliceWindow& w) {
  std::vector<std::int32_t> out(static_cast<std::size_t>(w.width() * w.height()), 0);
  if (labels.empty()) return out;
  const auto label_at = [&](std::int64_t x, std::int64_t y, std::int64_t z) {
    const auto row = labels.row(y, z);
    const auto run = std::upper_bound(row.begin(), row.end(), x,
                                      [](std::int64_t at, const LabelRun& r) { return at < r.end; });
    return run != row.end() && run->begin <= x ? run->label : 0;
  };
  for (std::int64_t v = 0; v < w.height(); ++v) {
    for (std::int64_t u = 0; u < w.width(); ++u) {
      const std::int64_t a = w.begin[0] + u * w.step, b = w.begin[1] + v * w.step;
      out[static_cast<std::size_t>(v * w.width() + u)] = w.axis == 2   ? label_at(a, b, w.index)
                                                         : w.axis == 1 ? label_at(a, w.index, b)
                                                                       : label_at(w.index, a, b);
    }
  }
  return out;
}

}  // namespace halfmark
