// How padding is recognised
//
// Reconstructions of a cylindrical field leave the slices' corners at one constant value. Padding is claimed
// when rows begin and end with exactly that value, in the same outline in every plane looked at, and when the
// values just inside keep clear of it: a constant background that blends into the part is air, not padding.
#include "analysis/field_of_view.h"

#include <algorithm>
#include <cmath>
#include <type_traits>
#include <vector>

#include "analysis/voxel_rows.h"

namespace halfmark {

namespace {

constexpr int looked_at_planes = 7;
// Outlines of different planes may differ by this many voxels (rounding of a circle), in this share of the
// rows.
constexpr std::int32_t outline_slack = 2;
constexpr double same_rows_share = 0.95;
// Less padding than this is not worth leaving out.
constexpr double least_padding_share = 0.01;
// Share of the voxels inside that may carry the padding's own value or come near it.
constexpr double near_padding_share = 0.002;

using Outline = std::vector<Run>;  // per row; begin == end: all padding

template <class T>
Outline outline_of(const T* plane, const std::array<std::int64_t, 3>& size, T padding) {
  Outline out(static_cast<std::size_t>(size[1]));
  for (std::int64_t y = 0; y < size[1]; ++y) {
    const T* row = plane + y * size[0];
    std::int64_t begin = 0, end = size[0];
    while (begin < end && row[begin] == padding) ++begin;
    while (end > begin && row[end - 1] == padding) --end;
    out[static_cast<std::size_t>(y)] = {static_cast<std::int32_t>(begin), static_cast<std::int32_t>(end)};
  }
  return out;
}

bool is_all_padding(const Outline& outline) {
  return std::all_of(outline.begin(), outline.end(), [](const Run& r) { return r.begin == r.end; });
}

bool agree(const Outline& a, const Outline& b) {
  std::size_t same = 0;
  for (std::size_t y = 0; y < a.size(); ++y) {
    const bool both_empty = a[y].begin == a[y].end && b[y].begin == b[y].end;
    same += both_empty || (std::abs(a[y].begin - b[y].begin) <= outline_slack &&
                           std::abs(a[y].end - b[y].end) <= outline_slack);
  }
  return static_cast<double>(same) >= same_rows_share * static_cast<double>(a.size());
}

// The larger of two outlines, row by row.
Outline joined(const Outline& a, const Outline& b) {
  Outline out = a;
  for (std::size_t y = 0; y < a.size(); ++y) {
    if (a[y].begin == a[y].end) {
      out[y] = b[y];
    } else if (b[y].begin != b[y].end) {
      out[y] = {std::min(a[y].begin, b[y].begin), std::max(a[y].end, b[y].end)};
    }
  }
  return out;
}

template <class T>
bool keeps_clear(const T* plane, const std::array<std::int64_t, 3>& size, const Outline& outline, T padding) {
  std::vector<double> distances;
  for (std::int64_t y = 0; y < size[1]; ++y) {
    const Run& run = outline[static_cast<std::size_t>(y)];
    for (std::int32_t x = run.begin; x < run.end; ++x) {
      distances.push_back(
          std::abs(static_cast<double>(plane[y * size[0] + x]) - static_cast<double>(padding)));
    }
  }
  if (distances.empty()) return false;
  auto fifth = distances.begin() + static_cast<std::ptrdiff_t>(distances.size() / 20);
  std::nth_element(distances.begin(), fifth, distances.end());
  const double near = 0.25 * *fifth;
  const auto close =
      std::count_if(distances.begin(), distances.end(), [near](double d) { return d <= near; });
  return static_cast<double>(close) <= near_padding_share * static_cast<double>(distances.size());
}

FieldOfView field_of(const Outline& outline, const VolumeGeometry& geometry,
                     const std::vector<std::uint8_t>& empty_planes, double padding) {
  FieldOfView field;
  field.rows = RunMask(geometry.size);
  for (std::int64_t z = 0; z < geometry.size[2]; ++z) {
    for (const Run& run : outline) {
      if (empty_planes[static_cast<std::size_t>(z)] == 0 && run.begin < run.end) {
        field.rows.add_run(run);
        field.voxels += run.end - run.begin;
      }
      field.rows.end_row();
    }
  }
  field.padding_grey = padding;
  return field;
}

template <class T>
std::optional<FieldOfView> look_for_padding(const VolumeSource& source, const RunControl& control) {
  const VolumeGeometry& geometry = source.geometry();
  const auto& size = geometry.size;
  SlabReader reader(source);
  const std::int64_t middle = size[2] / 2;
  const T* plane = reader.planes<T>(middle, middle + 1);
  const T padding = plane[0];
  const auto is_padding = [&](std::int64_t x, std::int64_t y) { return plane[y * size[0] + x] == padding; };
  if (!(is_padding(size[0] - 1, 0) && is_padding(0, size[1] - 1) && is_padding(size[0] - 1, size[1] - 1)))
    return std::nullopt;

  Outline outline = outline_of(plane, size, padding);
  if (is_all_padding(outline)) return std::nullopt;
  if (!keeps_clear(plane, size, outline, padding)) return std::nullopt;
  for (int i = 0; i < looked_at_planes; ++i) {
    control.throw_if_cancelled();
    const std::int64_t z = (size[2] - 1) * i / (looked_at_planes - 1);
    const Outline other = outline_of(reader.planes<T>(z, z + 1), size, padding);
    if (is_all_padding(other)) continue;
    if (!agree(outline, other)) return std::nullopt;
    outline = joined(outline, other);
  }
  std::vector<std::uint8_t> empty_planes(static_cast<std::size_t>(size[2]), 0);
  for (std::int64_t z = 0; z < size[2]; ++z) {
    const T* p = reader.planes<T>(z, z + 1);
    empty_planes[static_cast<std::size_t>(z)] =
        std::all_of(p, p + size[0] * size[1], [padding](T v) { return v == padding; });
  }
  FieldOfView field = field_of(outline, geometry, empty_planes, static_cast<double>(padding));
  const double left_out = 1 - static_cast<double>(field.voxels) / static_cast<double>(geometry.voxel_count());
  if (left_out < least_padding_share || field.voxels == 0) return std::nullopt;
  return field;
}

}  // namespace

FieldOfView whole_field(const VolumeGeometry& geometry) {
  FieldOfView field;
  field.rows = RunMask(geometry.size);
  for (std::int64_t r = 0; r < geometry.size[1] * geometry.size[2]; ++r) {
    field.rows.add_run({0, static_cast<std::int32_t>(geometry.size[0])});
    field.rows.end_row();
  }
  field.voxels = geometry.voxel_count();
  return field;
}

FieldOfView find_field_of_view(const VolumeSource& source, const RunControl& control) {
  const auto found = visit_voxel_type(source.voxel_type(), [&](auto* type) {
    return look_for_padding<std::remove_pointer_t<decltype(type)>>(source, control);
  });
  return found ? *found : whole_field(source.geometry());
}

}  // namespace halfmark
