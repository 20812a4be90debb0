#include "analysis/mask_morphology.h"

#include <tbb/enumerable_thread_specific.h>
#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <cstring>

#include "analysis/wide_registers.h"

namespace halfmark {

namespace {

// Squared distances are 16-bit integers, so that eight fit one SSE2 register. A radius keeps its exact
// integer square in voxels while that is at most max_square; beyond, and for non-cubic voxels, squares are
// rounded to 1/max_square.
constexpr double max_square = 15000;
constexpr std::int16_t far_away = 16000;
constexpr std::int64_t tile_edge = 64;

struct Ball {
  std::array<std::vector<std::int16_t>, 3>
      square;              // per axis: cost of an offset of k voxels, k = 0 ... reach
  std::int16_t limit = 0;  // squared radius

  std::int64_t reach(int axis) const {
    return static_cast<std::int64_t>(square[static_cast<std::size_t>(axis)].size()) - 1;
  }
};

Ball ball_of(double radius_mm, const Vec3& spacing_mm) {
  const bool cubic = spacing_mm[0] == spacing_mm[1] && spacing_mm[1] == spacing_mm[2];
  // A relative slack of 1e-9 keeps "radius 3 voxels" inclusive when 3 * spacing / spacing is a hair off.
  const double r = radius_mm * (1 + 1e-9);
  double unit_square = spacing_mm[0] * spacing_mm[0];
  if (!cubic || r * r / unit_square > max_square) unit_square = r * r / max_square;
  Ball ball;
  ball.limit = static_cast<std::int16_t>(std::floor(r * r / unit_square));
  for (std::size_t axis = 0; axis < 3; ++axis) {
    for (std::int64_t k = 0;; ++k) {
      const double s = static_cast<double>(k) * spacing_mm[axis];
      const double square = s * s / unit_square;
      if (std::lround(square) > ball.limit) break;
      ball.square[axis].push_back(static_cast<std::int16_t>(std::lround(square)));
    }
  }
  return ball;
}

struct Span3 {
  std::array<std::int64_t, 3> begin, end;
  std::int64_t extent(int axis) const {
    return end[static_cast<std::size_t>(axis)] - begin[static_cast<std::size_t>(axis)];
  }
};

enum class Content { none, all, some };

// What the mask holds of a region (clipped to the volume).
Content content_of(const RunMask& mask, const Span3& region) {
  bool any = false, missing = false;
  for (std::int64_t z = region.begin[2]; z < region.end[2]; ++z) {
    for (std::int64_t y = region.begin[1]; y < region.end[1]; ++y) {
      const auto row = mask.row(y, z);
      auto run = std::upper_bound(row.begin(), row.end(), region.begin[0],
                                  [](std::int64_t x, const Run& r) { return x < r.end; });
      const bool hit = run != row.end() && run->begin < region.end[0];
      const bool full = hit && run->begin <= region.begin[0] && run->end >= region.end[0];
      any = any || hit;
      missing = missing || !full;
      if (any && missing) return Content::some;
    }
  }
  return any ? Content::all : Content::none;
}

// Squared distances along x to the nearest set voxel of the row, for x in [begin, end).
void distances_along_x(std::span<const Run> row, std::int64_t begin, std::int64_t end, const Ball& ball,
                       std::int16_t* out) {
  const std::int64_t reach = ball.reach(0);
  std::fill(out, out + (end - begin), far_away);
  for (const Run& run : row) {
    if (run.end + reach <= begin) continue;
    if (run.begin - reach >= end) break;
    const std::int64_t first = std::max<std::int64_t>(run.begin, begin),
                       last = std::min<std::int64_t>(run.end, end);
    for (std::int64_t x = first; x < last; ++x) out[x - begin] = 0;
    for (std::int64_t k = 1; k <= reach; ++k) {
      const std::int16_t square = ball.square[0][static_cast<std::size_t>(k)];
      const std::int64_t left = run.begin - k, right = run.end - 1 + k;
      if (left >= begin && left < end) out[left - begin] = std::min(out[left - begin], square);
      if (right >= begin && right < end) out[right - begin] = std::min(out[right - begin], square);
    }
  }
}

// What a row of squared distances holds: lets whole rows be passed over.
enum class RowContent : std::uint8_t { far, some, zero };

RowContent content_of(const std::int16_t* row, std::int64_t count) {
  std::int16_t least = far_away, most = 0;
  for (std::int64_t x = 0; x < count; ++x) {
    least = std::min(least, row[x]);
    most = std::max(most, row[x]);
  }
  return least == far_away ? RowContent::far : most == 0 ? RowContent::zero : RowContent::some;
}

struct RowWithCost {
  const std::int16_t* row;
  std::int16_t cost;
};

// out[x] = least over the rows of row[x] + cost, at most far_away. Integers only: the same bits on every
// machine.
HALFMARK_FOR_WIDE_REGISTERS
void lowest_of(const RowWithCost* rows, std::size_t row_count, std::int64_t count, std::int16_t* out) {
  for (std::int64_t x = 0; x < count; ++x) out[x] = far_away;
  for (std::size_t r = 0; r < row_count; ++r) {
    const std::int16_t* row = rows[r].row;
    const std::int16_t cost = rows[r].cost;
    for (std::int64_t x = 0; x < count; ++x) {
      const auto through = static_cast<std::int16_t>(row[x] + cost);
      out[x] = std::min(out[x], through);
    }
  }
}

HALFMARK_FOR_WIDE_REGISTERS
void mark_within(const std::int16_t* squares, std::int16_t limit, std::int64_t count,
                 std::uint8_t* __restrict out) {
  for (std::int64_t x = 0; x < count; ++x) out[x] = static_cast<std::uint8_t>(squares[x] <= limit ? 1 : 0);
}

// Working memory of one thread, kept between tiles.
struct TileBuffers {
  std::vector<std::int16_t> along_x, along_xy, along_xyz;
  std::vector<RowContent> x_content, xy_content;
  std::vector<RowWithCost> rows;
  std::vector<std::uint8_t> tile_flags, strip_flags;
};

// Lowers along one axis for output position `at`: sources [begin, end), source s at data + (s - begin) *
// stride. Returns false when every source is far.
bool lower_along(const std::int16_t* data, const RowContent* content, std::int64_t content_stride,
                 std::int64_t stride, std::int64_t begin, std::int64_t end, std::int64_t at,
                 const std::vector<std::int16_t>& square, std::int64_t nx, std::vector<RowWithCost>& rows,
                 std::int16_t* out, RowContent& result) {
  const auto reach = static_cast<std::int64_t>(square.size()) - 1;
  if (content[(at - begin) * content_stride] == RowContent::zero) {
    std::fill(out, out + nx, std::int16_t{0});
    result = RowContent::zero;
    return true;
  }
  rows.clear();
  for (std::int64_t from = std::max(begin, at - reach); from < std::min(end, at + reach + 1); ++from) {
    if (content[(from - begin) * content_stride] == RowContent::far) continue;
    rows.push_back({data + (from - begin) * stride, square[static_cast<std::size_t>(std::abs(from - at))]});
  }
  result = rows.empty() ? RowContent::far : RowContent::some;
  if (rows.empty()) return false;
  lowest_of(rows.data(), rows.size(), nx, out);
  return true;
}

// Flags of the tile's voxels within the ball's radius of the mask: extent x * y * z bytes, x fastest.
void dilate_tile(const RunMask& mask, const Span3& tile, const Ball& ball, TileBuffers& buffers) {
  const auto& size = mask.size();
  const std::int64_t nx = tile.extent(0), ny = tile.extent(1);
  const std::int64_t z_begin = std::max<std::int64_t>(0, tile.begin[2] - ball.reach(2));
  const std::int64_t z_end = std::min(size[2], tile.end[2] + ball.reach(2));
  const std::int64_t y_begin = std::max<std::int64_t>(0, tile.begin[1] - ball.reach(1));
  const std::int64_t y_end = std::min(size[1], tile.end[1] + ball.reach(1));
  buffers.along_x.resize(static_cast<std::size_t>((y_end - y_begin) * nx));
  buffers.x_content.resize(static_cast<std::size_t>(y_end - y_begin));
  buffers.along_xy.resize(static_cast<std::size_t>((z_end - z_begin) * ny * nx));
  buffers.xy_content.resize(static_cast<std::size_t>((z_end - z_begin) * ny));
  for (std::int64_t z = z_begin; z < z_end; ++z) {
    for (std::int64_t y = y_begin; y < y_end; ++y) {
      std::int16_t* out = buffers.along_x.data() + (y - y_begin) * nx;
      distances_along_x(mask.row(y, z), tile.begin[0], tile.end[0], ball, out);
      buffers.x_content[static_cast<std::size_t>(y - y_begin)] = content_of(out, nx);
    }
    for (std::int64_t y = tile.begin[1]; y < tile.end[1]; ++y) {
      const std::int64_t r = (z - z_begin) * ny + (y - tile.begin[1]);
      lower_along(buffers.along_x.data(), buffers.x_content.data(), 1, nx, y_begin, y_end, y, ball.square[1],
                  nx, buffers.rows, buffers.along_xy.data() + r * nx,
                  buffers.xy_content[static_cast<std::size_t>(r)]);
    }
  }
  buffers.along_xyz.resize(static_cast<std::size_t>(nx));
  buffers.tile_flags.resize(static_cast<std::size_t>(tile.extent(2) * ny * nx));
  for (std::int64_t z = tile.begin[2]; z < tile.end[2]; ++z) {
    for (std::int64_t y = 0; y < ny; ++y) {
      std::uint8_t* out = buffers.tile_flags.data() + ((z - tile.begin[2]) * ny + y) * nx;
      RowContent content = RowContent::far;
      const bool near =
          lower_along(buffers.along_xy.data() + y * nx, buffers.xy_content.data() + y, ny, ny * nx, z_begin,
                      z_end, z, ball.square[2], nx, buffers.rows, buffers.along_xyz.data(), content);
      if (!near) {
        std::memset(out, 0, static_cast<std::size_t>(nx));
        continue;
      }
      mark_within(buffers.along_xyz.data(), ball.limit, nx, out);
    }
  }
}

Span3 grown(const Span3& tile, const Ball& ball, const std::array<std::int64_t, 3>& size) {
  Span3 out = tile;
  for (int axis = 0; axis < 3; ++axis) {
    const auto a = static_cast<std::size_t>(axis);
    out.begin[a] = std::max<std::int64_t>(0, tile.begin[a] - ball.reach(axis));
    out.end[a] = std::min(size[a], tile.end[a] + ball.reach(axis));
  }
  return out;
}

// One strip: rows [y0, y1) of planes [z0, z1) over the whole width, as flags in the buffers.
void dilate_strip(const RunMask& mask, const Span3& strip, const Ball& ball, TileBuffers& buffers) {
  const auto& size = mask.size();
  const std::int64_t rows = strip.extent(1) * strip.extent(2);
  buffers.strip_flags.resize(static_cast<std::size_t>(size[0] * rows));
  for (std::int64_t x = 0; x < size[0]; x += tile_edge) {
    Span3 tile = strip;
    tile.begin[0] = x;
    tile.end[0] = std::min(x + tile_edge, size[0]);
    const auto nx = static_cast<std::size_t>(tile.extent(0));
    const Content content = content_of(mask, grown(tile, ball, size));
    if (content == Content::some) dilate_tile(mask, tile, ball, buffers);
    for (std::int64_t r = 0; r < rows; ++r) {
      std::uint8_t* out = buffers.strip_flags.data() + r * size[0] + x;
      if (content == Content::some) {
        std::memcpy(out, buffers.tile_flags.data() + static_cast<std::size_t>(r) * nx, nx);
      } else {
        std::memset(out, content == Content::all, nx);
      }
    }
  }
}

using ThreadBuffers = tbb::enumerable_thread_specific<TileBuffers>;

RunMask dilate_slab(const RunMask& mask, std::int64_t z_begin, std::int64_t z_end, const Ball& ball,
                    ThreadBuffers& thread_buffers) {
  const auto& size = mask.size();
  const std::int64_t strips = (size[1] + tile_edge - 1) / tile_edge;
  std::vector<RunMask> parts(static_cast<std::size_t>(strips));
  tbb::parallel_for(std::int64_t{0}, strips, [&](std::int64_t s) {
    const Span3 strip{{0, s * tile_edge, z_begin}, {size[0], std::min(size[1], (s + 1) * tile_edge), z_end}};
    TileBuffers& buffers = thread_buffers.local();
    dilate_strip(mask, strip, ball, buffers);
    const std::uint8_t* flags = buffers.strip_flags.data();
    RunMask& part = parts[static_cast<std::size_t>(s)];
    part = RunMask({size[0], strip.extent(1), strip.extent(2)});
    for (std::int64_t r = 0; r < strip.extent(1) * strip.extent(2); ++r)
      add_row_of_flags(part, flags + r * size[0], size[0]);
  });
  RunMask out({size[0], size[1], z_end - z_begin});
  for (std::int64_t z = 0; z < z_end - z_begin; ++z) {
    for (const RunMask& part : parts) {
      for (std::int64_t y = 0; y < part.size()[1]; ++y) {
        for (const Run& run : part.row(y, z)) out.add_run(run);
        out.end_row();
      }
    }
  }
  return out;
}

}  // namespace

RunMask dilate(const RunMask& mask, double radius_mm, const Vec3& spacing_mm, const RunControl& control) {
  const Ball ball = ball_of(radius_mm, spacing_mm);
  const auto& size = mask.size();
  const std::int64_t slabs = (size[2] + tile_edge - 1) / tile_edge;
  std::vector<RunMask> parts(static_cast<std::size_t>(slabs));
  ThreadBuffers buffers;
  tbb::parallel_for(std::int64_t{0}, slabs, [&](std::int64_t s) {
    if (control.cancelled()) return;
    parts[static_cast<std::size_t>(s)] =
        dilate_slab(mask, s * tile_edge, std::min(size[2], (s + 1) * tile_edge), ball, buffers);
  });
  control.throw_if_cancelled();
  RunMask out(size);
  for (const RunMask& part : parts) out.append(part);
  return out;
}

RunMask erode(const RunMask& mask, double radius_mm, const Vec3& spacing_mm, bool border_inside,
              const RunControl& control) {
  if (border_inside) return complement(dilate(complement(mask), radius_mm, spacing_mm, control));
  // One voxel of margin makes the border's other side part of the complement.
  return padded(complement(dilate(complement(padded(mask, 1)), radius_mm, spacing_mm, control)), -1);
}

}  // namespace halfmark
