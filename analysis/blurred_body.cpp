#include "analysis/blurred_body.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <cstring>
#include <limits>
#include <numbers>
#include <type_traits>

#include "analysis/coverage.h"

namespace halfmark {

namespace {

constexpr double kernel_reach = 5;        // Gaussian kernels end at this many standard deviations
constexpr std::int64_t slab_planes = 16;  // planes rendered at once

// splitmix64's finaliser: neighbouring counters give unrelated bits.
std::uint64_t mixed(std::uint64_t x) {
  x += 0x9e3779b97f4a7c15ULL;
  x = (x ^ (x >> 30)) * 0xbf58476d1ce4e5b9ULL;
  x = (x ^ (x >> 27)) * 0x94d049bb133111ebULL;
  return x ^ (x >> 31);
}

// A normal number that depends on the seed and the place only (Box & Muller 1958).
float normal_at(std::uint64_t seed, std::int64_t x, std::int64_t y, std::int64_t z) {
  const std::uint64_t place =
      mixed(static_cast<std::uint64_t>(z) ^
            mixed(static_cast<std::uint64_t>(y) ^ mixed(static_cast<std::uint64_t>(x) ^ mixed(seed))));
  const double u = (static_cast<double>(place >> 40) + 0.5) / 16777216.0;
  const double v = static_cast<double>(place & 0xffffff) / 16777216.0;
  return static_cast<float>(std::sqrt(-2 * std::log(u)) * std::cos(2 * std::numbers::pi * v));
}

// Half of a symmetric kernel, weights [0 .. reach]; `power`: 1 keeps the sum, 2 keeps the variance of white
// noise.
std::vector<float> gaussian(double sigma, int power) {
  const auto reach = sigma > 0 ? static_cast<std::int64_t>(std::ceil(kernel_reach * sigma)) : 0;
  std::vector<double> weights;
  double sum = 0;
  for (std::int64_t k = 0; k <= reach; ++k) {
    weights.push_back(k == 0 ? 1 : std::exp(-0.5 * static_cast<double>(k * k) / (sigma * sigma)));
    const double w = power == 1 ? weights.back() : weights.back() * weights.back();
    sum += k == 0 ? w : 2 * w;
  }
  std::vector<float> out;
  for (const double w : weights) out.push_back(static_cast<float>(w / (power == 1 ? sum : std::sqrt(sum))));
  return out;
}

struct Block {  // planes with a margin
  std::int64_t nx = 0, ny = 0, nz = 0;
  std::vector<float> values;
  float* row(std::int64_t y, std::int64_t z) { return values.data() + (z * ny + y) * nx; }
};

// out = kernel * in along one axis. Places beyond the block repeat its last value; the caller drops the
// margin.
void smooth(Block& block, int axis, const std::vector<float>& kernel) {
  if (kernel.size() == 1) return;
  const auto reach = static_cast<std::int64_t>(kernel.size()) - 1;
  const std::int64_t count = axis == 0 ? block.nx : axis == 1 ? block.ny : block.nz;
  if (axis == 0) {
    std::vector<float> line(static_cast<std::size_t>(block.nx + 2 * reach));
    for (std::int64_t r = 0; r < block.ny * block.nz; ++r) {
      float* row = block.values.data() + r * block.nx;
      for (std::int64_t i = 0; i < static_cast<std::int64_t>(line.size()); ++i)
        line[static_cast<std::size_t>(i)] = row[std::clamp<std::int64_t>(i - reach, 0, block.nx - 1)];
      for (std::int64_t x = 0; x < block.nx; ++x)
        row[x] = kernel[0] * line[static_cast<std::size_t>(x + reach)];
      for (std::int64_t k = 1; k <= reach; ++k) {
        const float w = kernel[static_cast<std::size_t>(k)];
        const float* left = line.data() + reach - k;
        const float* right = line.data() + reach + k;
        for (std::int64_t x = 0; x < block.nx; ++x) row[x] += w * (left[x] + right[x]);
      }
    }
    return;
  }
  const std::int64_t lines = axis == 1 ? block.nz : block.ny;
  std::vector<float> copy(static_cast<std::size_t>(count * block.nx));
  for (std::int64_t l = 0; l < lines; ++l) {
    const auto at = [&](std::int64_t i) { return axis == 1 ? block.row(i, l) : block.row(l, i); };
    for (std::int64_t i = 0; i < count; ++i) std::copy_n(at(i), block.nx, copy.data() + i * block.nx);
    for (std::int64_t i = 0; i < count; ++i) {
      float* row = at(i);
      const float* centre = copy.data() + i * block.nx;
      for (std::int64_t x = 0; x < block.nx; ++x) row[x] = kernel[0] * centre[x];
      for (std::int64_t k = 1; k <= reach; ++k) {
        const float w = kernel[static_cast<std::size_t>(k)];
        const float* before = copy.data() + std::max<std::int64_t>(i - k, 0) * block.nx;
        const float* after = copy.data() + std::min(i + k, count - 1) * block.nx;
        for (std::int64_t x = 0; x < block.nx; ++x) row[x] += w * (before[x] + after[x]);
      }
    }
  }
}

template <class T>
T rounded(float value) {
  if constexpr (std::is_floating_point_v<T>) {
    return value;
  } else {
    const float low = static_cast<float>(std::numeric_limits<T>::lowest()),
                high = static_cast<float>(std::numeric_limits<T>::max());
    return static_cast<T>(std::floor(std::clamp(value, low, high) + 0.5f));
  }
}

class Scan : public VolumeSource {
 public:
  Scan(std::vector<ScannedBody> bodies, const VolumeGeometry& geometry, const ScanModel& scan)
      : bodies_(std::move(bodies)), geometry_(geometry), scan_(scan) {
    for (const ScannedBody& body : bodies_) reach_.push_back(voxel_reach(body.body->bounds(), geometry));
    for (std::size_t a = 0; a < 3; ++a) {
      blur_[a] = gaussian(scan.blur_voxel * geometry.voxel_mm() / geometry.spacing_mm[a], 1);
      correlation_[a] =
          gaussian(scan.noise_correlation_voxel * geometry.voxel_mm() / geometry.spacing_mm[a], 2);
    }
  }

  const VolumeGeometry& geometry() const override { return geometry_; }
  VoxelType voxel_type() const override { return scan_.type; }

  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    const std::size_t plane =
        static_cast<std::size_t>(geometry_.voxels_per_plane()) * bytes_per_voxel(scan_.type);
    const std::int64_t slabs = (z_end - z_begin + slab_planes - 1) / slab_planes;
    tbb::parallel_for(std::int64_t{0}, slabs, [&](std::int64_t s) {
      const std::int64_t z = z_begin + s * slab_planes;
      render(z, std::min(z + slab_planes, z_end), out + plane * static_cast<std::size_t>(z - z_begin));
    });
  }

 private:
  void render(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const {
    Block share = blurred_shares(z_begin, z_end);
    const Block noise = scan_.noise_grey > 0 ? noise_block(z_begin, z_end) : Block{};
    const double cx = 0.5 * static_cast<double>(geometry_.size[0] - 1),
                 cy = 0.5 * static_cast<double>(geometry_.size[1] - 1);
    const double full = 0.5 * std::min(static_cast<double>(geometry_.size[0]) * geometry_.spacing_mm[0],
                                       static_cast<double>(geometry_.size[1]) * geometry_.spacing_mm[1]);
    const double contrast = scan_.material_grey - scan_.air_grey;
    visit_voxel_type(scan_.type, [&](auto* type) {
      using T = std::remove_pointer_t<decltype(type)>;
      T* target = reinterpret_cast<T*>(out);
      for (std::int64_t z = z_begin; z < z_end; ++z) {
        for (std::int64_t y = 0; y < geometry_.size[1]; ++y) {
          const float* row = share.row(y, z - z_begin);
          for (std::int64_t x = 0; x < geometry_.size[0]; ++x) {
            const double rx = (static_cast<double>(x) - cx) * geometry_.spacing_mm[0],
                         ry = (static_cast<double>(y) - cy) * geometry_.spacing_mm[1];
            const double r2 = rx * rx + ry * ry;
            double grey = scan_.padding_grey;
            if (!(scan_.padding_radius_mm > 0 && r2 > scan_.padding_radius_mm * scan_.padding_radius_mm)) {
              const double level = contrast * (1 - scan_.cupping * (1 - r2 / (full * full)));
              grey = scan_.air_grey + static_cast<double>(row[x]) * level;
              if (scan_.ring_grey != 0)
                grey += scan_.ring_grey * ring_at(std::sqrt(r2) / geometry_.spacing_mm[0]);
              if (!noise.values.empty()) {
                grey += scan_.noise_grey * static_cast<double>(noise.values[static_cast<std::size_t>(
                                               ((z - z_begin) * noise.ny + y) * noise.nx + x)]);
              }
            }
            *target++ = rounded<T>(static_cast<float>(grey));
          }
        }
      }
    });
  }

  // A ring's height at a radius in voxels: a fixed random number per whole radius.
  double ring_at(double radius) const {
    return normal_at(scan_.seed ^ 0x52696e67, static_cast<std::int64_t>(radius), 0, 0);
  }

  Block blurred_shares(std::int64_t z_begin, std::int64_t z_end) const {
    const auto margin = static_cast<std::int64_t>(blur_[2].size()) - 1;
    Block block{geometry_.size[0], geometry_.size[1], z_end - z_begin + 2 * margin, {}};
    block.values.resize(static_cast<std::size_t>(block.nx * block.ny * block.nz));
    std::vector<float> shares(static_cast<std::size_t>(block.nx));
    std::vector<std::size_t> near;  // bodies that reach the plane, in their order
    for (std::int64_t z = 0; z < block.nz; ++z) {
      const std::int64_t source_z = std::clamp<std::int64_t>(z_begin - margin + z, 0, geometry_.size[2] - 1);
      near.clear();
      for (std::size_t b = 0; b < bodies_.size(); ++b) {
        if (source_z >= reach_[b].begin[2] && source_z < reach_[b].end[2]) near.push_back(b);
      }
      for (std::int64_t y = 0; y < block.ny; ++y) {
        std::fill(shares.begin(), shares.end(), 0.0f);
        for (const std::size_t b : near) {
          if (y < reach_[b].begin[1] || y >= reach_[b].end[1]) continue;
          cover_row(*bodies_[b].body, reach_[b], geometry_, y, source_z,
                    static_cast<float>(bodies_[b].grey_share), shares);
        }
        std::copy(shares.begin(), shares.end(), block.row(y, z));
      }
    }
    for (int axis = 0; axis < 3; ++axis) smooth(block, axis, blur_[static_cast<std::size_t>(axis)]);
    return without_margin(std::move(block), 0, 0, margin);
  }

  Block noise_block(std::int64_t z_begin, std::int64_t z_end) const {
    const auto mx = static_cast<std::int64_t>(correlation_[0].size()) - 1,
               my = static_cast<std::int64_t>(correlation_[1].size()) - 1,
               mz = static_cast<std::int64_t>(correlation_[2].size()) - 1;
    Block block{geometry_.size[0] + 2 * mx, geometry_.size[1] + 2 * my, z_end - z_begin + 2 * mz, {}};
    block.values.resize(static_cast<std::size_t>(block.nx * block.ny * block.nz));
    for (std::int64_t z = 0; z < block.nz; ++z) {
      for (std::int64_t y = 0; y < block.ny; ++y) {
        float* row = block.row(y, z);
        for (std::int64_t x = 0; x < block.nx; ++x)
          row[x] = normal_at(scan_.seed, x - mx, y - my, z_begin - mz + z);
      }
    }
    for (int axis = 0; axis < 3; ++axis) smooth(block, axis, correlation_[static_cast<std::size_t>(axis)]);
    return without_margin(std::move(block), mx, my, mz);
  }

  static Block without_margin(Block block, std::int64_t mx, std::int64_t my, std::int64_t mz) {
    if (mx == 0 && my == 0 && mz == 0) return block;
    Block out{block.nx - 2 * mx, block.ny - 2 * my, block.nz - 2 * mz, {}};
    out.values.resize(static_cast<std::size_t>(out.nx * out.ny * out.nz));
    for (std::int64_t z = 0; z < out.nz; ++z) {
      for (std::int64_t y = 0; y < out.ny; ++y)
        std::copy_n(block.row(y + my, z + mz) + mx, out.nx, out.row(y, z));
    }
    return out;
  }

  std::vector<ScannedBody> bodies_;
  std::vector<VoxelReach> reach_;
  VolumeGeometry geometry_;
  ScanModel scan_;
  std::array<std::vector<float>, 3> blur_, correlation_;
};

}  // namespace

std::unique_ptr<VolumeSource> scan_of(std::vector<ScannedBody> bodies, const VolumeGeometry& geometry,
                                      const ScanModel& scan) {
  return std::make_unique<Scan>(std::move(bodies), geometry, scan);
}

MemoryVolume render_scan(const std::vector<ScannedBody>& bodies, const VolumeGeometry& geometry,
                         const ScanModel& scan, const RunControl& control) {
  const Scan source(bodies, geometry, scan);
  MemoryVolume volume(geometry, scan.type);
  const std::size_t plane =
      static_cast<std::size_t>(geometry.voxels_per_plane()) * bytes_per_voxel(scan.type);
  const std::int64_t slabs = (geometry.size[2] + slab_planes - 1) / slab_planes;
  tbb::parallel_for(std::int64_t{0}, slabs, [&](std::int64_t s) {
    if (control.cancelled()) return;
    const std::int64_t begin = s * slab_planes, end = std::min(begin + slab_planes, geometry.size[2]);
    source.read_planes(begin, end, volume.data() + plane * static_cast<std::size_t>(begin));
  });
  control.throw_if_cancelled();
  return volume;
}

}  // namespace halfmark
