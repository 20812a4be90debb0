#include "analysis/grey_deficit.h"

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <cstring>
#include <type_traits>

#include "analysis/wide_registers.h"

namespace halfmark {

namespace {

// Beyond this many edge widths a face no longer shows: 1 - Phi(3.5) = 0.0002.
constexpr double band_widths = 3.5;
// Nearer to the face than this coverage (1.9 edge widths) a dent of the face and a pore cannot be told apart.
constexpr float least_coverage = 0.97f;
// From this coverage on (3.3 edge widths) the face leaves no trace worth the name.
constexpr float clear_coverage = 0.9995f;

// Beyond this reach a kernel's taps are taken in a loop of its own length.
constexpr std::int64_t most_fixed_taps = 6;

// out = weights[0] rows[reach] + sum over k of weights[k] (rows[reach - k] + rows[reach + k]), in one pass.
template <std::int64_t fixed_reach>
__attribute__((always_inline)) inline void weigh(float* out, const float* const* rows, const float* weights,
                                                 std::int64_t reach, std::int64_t count) {
  if constexpr (fixed_reach > 0) reach = fixed_reach;
  for (std::int64_t x = 0; x < count; ++x) {
    float sum = weights[0] * rows[reach][x];
    for (std::int64_t k = 1; k <= reach; ++k) sum += weights[k] * (rows[reach - k][x] + rows[reach + k][x]);
    out[x] = sum;
  }
}

HALFMARK_FOR_WIDE_REGISTERS
void weigh_rows(float* __restrict out, const float* const* rows, const float* weights, std::int64_t reach,
                std::int64_t count) {
  switch (reach) {
    case 1:
      return weigh<1>(out, rows, weights, reach, count);
    case 2:
      return weigh<2>(out, rows, weights, reach, count);
    case 3:
      return weigh<3>(out, rows, weights, reach, count);
    case 4:
      return weigh<4>(out, rows, weights, reach, count);
    case 5:
      return weigh<5>(out, rows, weights, reach, count);
    case most_fixed_taps:
      return weigh<most_fixed_taps>(out, rows, weights, reach, count);
    default:
      return weigh<0>(out, rows, weights, reach, count);
  }
}

template <class T>
__attribute__((always_inline)) inline void convert(float* __restrict out, const T* __restrict in,
                                                   std::int64_t count) {
  for (std::int64_t x = 0; x < count; ++x) out[x] = static_cast<float>(in[x]);
}

// One function a voxel type: the mark for wide registers wants no templates.
HALFMARK_FOR_WIDE_REGISTERS
void to_floats(float* out, const std::uint8_t* in, std::int64_t count) { convert(out, in, count); }
HALFMARK_FOR_WIDE_REGISTERS
void to_floats(float* out, const std::int8_t* in, std::int64_t count) { convert(out, in, count); }
HALFMARK_FOR_WIDE_REGISTERS
void to_floats(float* out, const std::uint16_t* in, std::int64_t count) { convert(out, in, count); }
HALFMARK_FOR_WIDE_REGISTERS
void to_floats(float* out, const std::int16_t* in, std::int64_t count) { convert(out, in, count); }
void to_floats(float* out, const float* in, std::int64_t count) { std::copy(in, in + count, out); }

HALFMARK_FOR_WIDE_REGISTERS
void deficits_of(float* grey_to_deficit, const float* level, float air, std::int64_t count) {
  for (std::int64_t x = 0; x < count; ++x)
    grey_to_deficit[x] = (level[x] - grey_to_deficit[x]) / (level[x] - air);
}

// Sets border[1 .. count - 2]: not zero where the row's flag differs from that of a 6-neighbour.
HALFMARK_FOR_WIDE_REGISTERS
void mark_border(std::uint8_t* border, const std::uint8_t* row, std::int64_t count, std::int64_t plane) {
  const std::uint8_t *above = row - count, *below = row + count, *before = row - plane, *after = row + plane;
  for (std::int64_t x = 1; x + 1 < count; ++x) {
    const int f = row[x];
    border[x] = static_cast<std::uint8_t>((f ^ row[x - 1]) | (f ^ row[x + 1]) | (f ^ above[x]) |
                                          (f ^ below[x]) | (f ^ before[x]) | (f ^ after[x]));
  }
}

// The first place in [from, end) with a flag that is not zero; end if there is none.
std::int64_t next_marked(const std::uint8_t* flags, std::int64_t from, std::int64_t end) {
  std::uint64_t eight = 0;
  for (; from + 8 <= end; from += 8) {
    std::memcpy(&eight, flags + from, sizeof eight);
    if (eight != 0) break;
  }
  while (from < end && flags[from] == 0) ++from;
  return from;
}

HALFMARK_FOR_WIDE_REGISTERS
void mark_usable(std::uint8_t* usable, const float* coverage, const float* grey, float least, float threshold,
                 std::int64_t begin, std::int64_t end) {
  for (std::int64_t x = begin; x < end; ++x) {
    usable[x] = static_cast<std::uint8_t>(((coverage[x] >= least) | (grey[x] < threshold) ? 1 : 0) +
                                          (coverage[x] >= clear_coverage ? 1 : 0));
  }
}

// Deficits against the grey value that a partly covered voxel should have; 0 where the voxel is not usable.
HALFMARK_FOR_WIDE_REGISTERS
void border_deficits_of(float* grey_to_deficit, const float* level, const float* coverage,
                        const std::uint8_t* usable, float air, std::int64_t count) {
  for (std::int64_t x = 0; x < count; ++x) {
    const float expected = air + coverage[x] * (level[x] - air);
    const float deficit = (expected - grey_to_deficit[x]) / (level[x] - air);
    grey_to_deficit[x] = usable[x] != 0 ? deficit : 0.0f;
  }
}

// Inverse of the normal distribution, good to 0.002 within +-2.5 (Abramowitz & Stegun 26.2.22 is coarser than
// needed here; a short table is exact enough and quick).
double normal_quantile(double p) {
  static const std::vector<double> table = [] {
    std::vector<double> t;
    for (int i = 0; i <= 512; ++i) {
      const double target = std::clamp(i / 512.0, 1e-4, 1 - 1e-4);
      double low = -5, high = 5;
      for (int k = 0; k < 60; ++k) {
        const double middle = 0.5 * (low + high);
        (0.5 * std::erfc(-middle * M_SQRT1_2) < target ? low : high) = middle;
      }
      t.push_back(0.5 * (low + high));
    }
    return t;
  }();
  const double at = std::clamp(p, 0.0, 1.0) * 512;
  const auto i = static_cast<std::size_t>(std::min(at, 511.0));
  return table[i] + (at - static_cast<double>(i)) * (table[i + 1] - table[i]);
}

}  // namespace

std::vector<float> half_gaussian(double sigma, double reach) {
  const auto last = static_cast<std::int64_t>(std::ceil(reach * sigma));
  std::vector<double> weights;
  double sum = 0;
  for (std::int64_t k = 0; k <= last; ++k) {
    weights.push_back(std::exp(-0.5 * static_cast<double>(k * k) / (sigma * sigma)));
    sum += k == 0 ? weights.back() : 2 * weights.back();
  }
  std::vector<float> out;
  for (const double w : weights) out.push_back(static_cast<float>(w / sum));
  return out;
}

void smooth_block(std::vector<float>& values, const VoxelBox& box,
                  const std::array<std::vector<float>, 3>& kernel, std::vector<float>& line) {
  const std::int64_t nx = box.extent(0), ny = box.extent(1), nz = box.extent(2);
  std::array<std::int64_t, 3> reach;
  for (std::size_t a = 0; a < 3; ++a) reach[a] = static_cast<std::int64_t>(kernel[a].size()) - 1;
  const std::int64_t taps = 2 * std::max({reach[0], reach[1], reach[2]}) + 1;
  std::vector<const float*> rows(static_cast<std::size_t>(taps));
  line.resize(values.size());
  float* const first = values.data();
  float* const second = line.data();
  const auto row = [&](float* of, std::int64_t y, std::int64_t z) { return of + (z * ny + y) * nx; };
  // Along x into `second`, y back into `values`, z into `second`: what the later axes do not need is left.
  for (std::int64_t r = 0; r < ny * nz && nx > 2 * reach[0]; ++r) {
    for (std::int64_t k = 0; k <= 2 * reach[0]; ++k) rows[static_cast<std::size_t>(k)] = first + r * nx + k;
    weigh_rows(second + r * nx + reach[0], rows.data(), kernel[0].data(), reach[0], nx - 2 * reach[0]);
  }
  for (std::int64_t z = 0; z < nz; ++z) {
    for (std::int64_t y = reach[1]; y < ny - reach[1]; ++y) {
      for (std::int64_t k = 0; k <= 2 * reach[1]; ++k)
        rows[static_cast<std::size_t>(k)] = row(second, y - reach[1] + k, z);
      weigh_rows(row(first, y, z), rows.data(), kernel[1].data(), reach[1], nx);
    }
  }
  for (std::int64_t z = reach[2]; z < nz - reach[2]; ++z) {
    for (std::int64_t y = reach[1]; y < ny - reach[1]; ++y) {
      for (std::int64_t k = 0; k <= 2 * reach[2]; ++k)
        rows[static_cast<std::size_t>(k)] = row(first, y, z - reach[2] + k);
      weigh_rows(row(second, y, z), rows.data(), kernel[2].data(), reach[2], nx);
    }
  }
  std::swap(values, line);
}

GreyDeficit::GreyDeficit(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
                         const PartMap& part, const MaterialLevel& level)
    : source_(source), field_(field), levels_(levels), part_(part), level_(level) {
  const VolumeGeometry& geometry = source.geometry();
  edge_width_ = std::sqrt(levels.blur_voxel * levels.blur_voxel + 1.0 / 12);
  for (std::size_t a = 0; a < 3; ++a) {
    const double scale = geometry.voxel_mm() / geometry.spacing_mm[a];
    kernel_[a] = half_gaussian(std::max(0.3, levels.blur_voxel * scale), band_widths);
    band_[a] = static_cast<std::int64_t>(kernel_[a].size());
  }
}

namespace {

enum class Content { none, all, some };

Content content_of(const RunMask& mask, const VoxelBox& box) {
  const auto& size = mask.size();
  bool any = false, missing = false;
  const auto clamp = [&](std::int64_t v, std::size_t a) { return std::clamp<std::int64_t>(v, 0, size[a]); };
  const std::int64_t x0 = clamp(box.begin[0], 0), x1 = clamp(box.end[0], 0);
  if (x0 >= x1) return Content::none;
  for (std::int64_t z = clamp(box.begin[2], 2); z < clamp(box.end[2], 2); ++z) {
    for (std::int64_t y = clamp(box.begin[1], 1); y < clamp(box.end[1], 1); ++y) {
      const auto row = mask.row(y, z);
      const auto run = std::upper_bound(row.begin(), row.end(), x0,
                                        [](std::int64_t x, const Run& r) { return x < r.end; });
      const bool hit = run != row.end() && run->begin < x1;
      any = any || hit;
      missing = missing || !(hit && run->begin <= x0 && run->end >= x1);
      if (any && missing) return Content::some;
    }
  }
  return any ? Content::all : Content::none;
}

}  // namespace

bool GreyDeficit::fill(const VoxelBox& box, const GreyPlanes& planes, DeficitBlock& block) const {
  if (content_of(part_.inside, box) == Content::none) return false;
  block.box = box;
  block.deep = content_of(part_.inside, box.grown(band_)) == Content::all;
  visit_voxel_type(source_.voxel_type(),
                   [&](auto* type) { fill_typed<std::remove_pointer_t<decltype(type)>>(planes, block); });
  return true;
}

// The share of each voxel that lies inside: 1 and 0 by the mask, sub-voxel at its border from the edge's grey
// value.
template <class T>
void GreyDeficit::cover_border(const GreyPlanes& planes, const VoxelBox& box, DeficitBlock& block) const {
  std::vector<float>& coverage = block.coverage;
  const auto& size = source_.geometry().size;
  const std::int64_t nx = box.extent(0), ny = box.extent(1), nz = box.extent(2);
  coverage.assign(static_cast<std::size_t>(nx * ny * nz), 0);
  std::vector<std::uint8_t>& flags = block.flags;
  flags.assign(coverage.size(), 0);
  std::vector<Content> rows(static_cast<std::size_t>(ny * nz), Content::none);
  const auto clamped = [&](std::int64_t v, std::size_t a) {
    return std::clamp<std::int64_t>(v, 0, size[a] - 1);
  };
  for (std::int64_t z = 0; z < nz; ++z) {
    for (std::int64_t y = 0; y < ny; ++y) {
      const std::int64_t sy = clamped(box.begin[1] + y, 1), sz = clamped(box.begin[2] + z, 2);
      const std::int64_t r = z * ny + y;
      std::int64_t filled = 0;
      for (const Run& run : part_.inside.row(sy, sz)) {
        const std::int64_t begin =
            run.begin == 0 ? 0 : std::clamp<std::int64_t>(run.begin - box.begin[0], 0, nx);
        const std::int64_t end =
            run.end == size[0] ? nx : std::clamp<std::int64_t>(run.end - box.begin[0], 0, nx);
        if (begin >= end) continue;
        std::fill(coverage.data() + r * nx + begin, coverage.data() + r * nx + end, 1.0f);
        std::fill(flags.data() + r * nx + begin, flags.data() + r * nx + end, std::uint8_t{1});
        filled += end - begin;
      }
      rows[static_cast<std::size_t>(r)] = filled == 0    ? Content::none
                                          : filled == nx ? Content::all
                                                         : Content::some;
    }
  }
  // Border voxels: a flag differs from a 6-neighbour's. Their grey value tells how far the face is.
  const T* greys = reinterpret_cast<const T*>(planes.voxels);
  const double contrast = levels_.contrast();
  std::vector<std::uint8_t> border(static_cast<std::size_t>(nx));
  for (std::int64_t z = 1; z + 1 < nz; ++z) {
    for (std::int64_t y = 1; y + 1 < ny; ++y) {
      const std::int64_t gy = box.begin[1] + y, gz = box.begin[2] + z;
      if (gy < 0 || gz < planes.z_begin || gy >= size[1] || gz >= planes.z_end) continue;
      const std::int64_t r = z * ny + y;
      const auto same = [&](std::int64_t d) {
        return rows[static_cast<std::size_t>(r + d)] == rows[static_cast<std::size_t>(r)];
      };
      if (rows[static_cast<std::size_t>(r)] != Content::some && same(1) && same(-1) && same(ny) && same(-ny))
        continue;
      const std::uint8_t* row = flags.data() + r * nx;
      mark_border(border.data(), row, nx, nx * ny);
      for (std::int64_t x = next_marked(border.data(), 1, nx - 1); x + 1 < nx;
           x = next_marked(border.data(), x + 1, nx - 1)) {
        const std::int64_t gx = box.begin[0] + x;
        if (gx < 0 || gx >= size[0]) continue;
        const double grey = static_cast<double>(greys[((gz - planes.z_begin) * size[1] + gy) * size[0] + gx]);
        // A border voxel whose grey contradicts its flag belongs to a mouth or to rough ground: the mask
        // decides.
        if ((grey >= levels_.threshold) != (row[x] != 0)) continue;
        const double depth = edge_width_ * normal_quantile((grey - levels_.air) / contrast);
        coverage[static_cast<std::size_t>(r * nx + x)] =
            static_cast<float>(std::clamp(0.5 + depth, 0.0, 1.0));
      }
    }
  }
}

template <class T>
void GreyDeficit::fill_typed(const GreyPlanes& planes, DeficitBlock& block) const {
  const VoxelBox& box = block.box;
  const auto& size = source_.geometry().size;
  const std::int64_t nx = box.extent(0), ny = box.extent(1), nz = box.extent(2);
  block.deficit.resize(static_cast<std::size_t>(box.voxels()));
  block.usable.resize(static_cast<std::size_t>(box.voxels()));
  const float* coverage = nullptr;
  VoxelBox wide = box;
  if (!block.deep) {
    wide = box.grown(band_);
    cover_border<T>(planes, wide, block);
    smooth_block(block.coverage, wide, kernel_, block.line);
    coverage = block.coverage.data();
  }
  std::vector<float> level(static_cast<std::size_t>(nx));
  const T* greys = reinterpret_cast<const T*>(planes.voxels);
  const auto air = static_cast<float>(levels_.air), threshold = static_cast<float>(levels_.threshold);
  const std::int64_t x0 = std::clamp<std::int64_t>(box.begin[0], 0, size[0]),
                     x1 = std::clamp<std::int64_t>(box.end[0], 0, size[0]);
  for (std::int64_t z = 0; z < nz; ++z) {
    const std::int64_t gz = std::clamp<std::int64_t>(box.begin[2] + z, planes.z_begin, planes.z_end - 1);
    const MaterialLevel::Plane level_plane = level_.plane(gz);
    for (std::int64_t y = 0; y < ny; ++y) {
      const std::int64_t gy = std::clamp<std::int64_t>(box.begin[1] + y, 0, size[1] - 1);
      float* out = block.deficit.data() + (z * ny + y) * nx;
      std::uint8_t* usable = block.usable.data() + (z * ny + y) * nx;
      const T* row = greys + ((gz - planes.z_begin) * size[1] + gy) * size[0];
      level_plane.row(gy, x0, x1, level.data() + (x0 - box.begin[0]));
      for (std::int64_t x = 0; x < x0 - box.begin[0]; ++x)
        level[static_cast<std::size_t>(x)] = level[static_cast<std::size_t>(x0 - box.begin[0])];
      for (std::int64_t x = x1 - box.begin[0]; x < nx; ++x)
        level[static_cast<std::size_t>(x)] = level[static_cast<std::size_t>(x1 - 1 - box.begin[0])];
      for (std::int64_t x = 0; x < x0 - box.begin[0]; ++x) out[x] = static_cast<float>(row[x0]);
      to_floats(out + (x0 - box.begin[0]), row + x0, x1 - x0);
      for (std::int64_t x = x1 - box.begin[0]; x < nx; ++x) out[x] = static_cast<float>(row[x1 - 1]);
      if (block.deep) {
        deficits_of(out, level.data(), air, nx);
        std::fill(usable, usable + nx, clear_of_face);
        continue;
      }
      const float* p =
          coverage + ((z + band_[2]) * wide.extent(1) + y + band_[1]) * wide.extent(0) + band_[0];
      std::fill(usable, usable + nx, std::uint8_t{0});
      for (const Run& run : part_.inside.row(gy, gz)) {
        const std::int64_t begin =
            run.begin == 0 ? 0 : std::clamp<std::int64_t>(run.begin - box.begin[0], 0, nx);
        const std::int64_t end =
            run.end == size[0] ? nx : std::clamp<std::int64_t>(run.end - box.begin[0], 0, nx);
        mark_usable(usable, p, out, least_coverage, threshold, begin, end);
      }
      border_deficits_of(out, level.data(), p, usable, air, nx);
    }
  }
}

}  // namespace halfmark
