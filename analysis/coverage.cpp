#include "analysis/coverage.h"

#include <algorithm>
#include <cmath>

namespace halfmark {

namespace {

constexpr int subsamples = 6;
// The ramp's width in sub-sample edges. A ramp of width w raises a ball's volume by w^2 / (4 R^2); none at all would
// make faces along the axes jump from sample to sample.
constexpr double ramp_width = 0.5;

struct VoxelFrame {
  Vec3 step[3];  // one voxel along x, y, z in mm
  double half_diagonal;
  double ramp_mm;
};

VoxelFrame frame_of(const VolumeGeometry& geometry) {
  VoxelFrame frame;
  const Vec3 origin = geometry.index_to_mm({0, 0, 0});
  for (std::size_t a = 0; a < 3; ++a) {
    Vec3 one{0, 0, 0};
    one[a] = 1;
    frame.step[a] = geometry.index_to_mm(one) - origin;
  }
  frame.half_diagonal = 0.5 * length(geometry.spacing_mm);
  frame.ramp_mm = ramp_width * geometry.voxel_mm() / subsamples;
  return frame;
}

double sampled_coverage(const Solid& solid, const Vec3& centre, const VoxelFrame& frame) {
  double sum = 0;
  for (int k = 0; k < subsamples; ++k) {
    for (int j = 0; j < subsamples; ++j) {
      for (int i = 0; i < subsamples; ++i) {
        const auto offset = [](int n) { return (n + 0.5) / subsamples - 0.5; };
        const Vec3 p =
            centre + offset(i) * frame.step[0] + offset(j) * frame.step[1] + offset(k) * frame.step[2];
        sum += std::clamp(0.5 - solid.signed_distance_mm(p) / frame.ramp_mm, 0.0, 1.0);
      }
    }
  }
  return sum / (subsamples * subsamples * subsamples);
}

// The x range of the row that the bounds can reach, by the corners of the bounds in index space.
std::pair<std::int64_t, std::int64_t> reach_of(const SolidBounds& bounds, const VolumeGeometry& geometry,
                                               std::int64_t y, std::int64_t z) {
  Vec3 low{1e300, 1e300, 1e300}, high{-1e300, -1e300, -1e300};
  for (std::size_t corner = 0; corner < 8; ++corner) {
    Vec3 c;
    for (std::size_t a = 0; a < 3; ++a) c[a] = ((corner >> a) & 1) != 0 ? bounds.max_mm[a] : bounds.min_mm[a];
    const Vec3 index = geometry.mm_to_index(c);
    for (std::size_t a = 0; a < 3; ++a) {
      low[a] = std::min(low[a], index[a]);
      high[a] = std::max(high[a], index[a]);
    }
  }
  const auto beyond = [](double value, double a, double b) { return value < a - 1 || value > b + 1; };
  if (beyond(static_cast<double>(y), low[1], high[1]) || beyond(static_cast<double>(z), low[2], high[2]))
    return {0, 0};
  const auto width = static_cast<double>(geometry.size[0]);
  return {static_cast<std::int64_t>(std::clamp(std::floor(low[0]) - 1, 0.0, width)),
          static_cast<std::int64_t>(std::clamp(std::ceil(high[0]) + 2, 0.0, width))};
}

}  // namespace

void cover_row(const Solid& solid, const SolidBounds& bounds, const VolumeGeometry& geometry, std::int64_t y,
               std::int64_t z, float body_share, std::vector<float>& shares) {
  const auto [begin, end] = reach_of(bounds, geometry, y, z);
  if (begin >= end) return;
  const VoxelFrame frame = frame_of(geometry);
  const double step = geometry.spacing_mm[0];
  for (std::int64_t x = begin; x < end;) {
    const Vec3 centre =
        geometry.index_to_mm({static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)});
    const double d = solid.signed_distance_mm(centre);
    if (std::abs(d) > frame.half_diagonal) {
      const double clear = (std::abs(d) - frame.half_diagonal) / step;
      const std::int64_t next = x + 1 + static_cast<std::int64_t>(std::min(clear, 1e9) * (1 - 1e-9));
      const std::int64_t stop = std::min(next, end);
      if (d < 0) std::fill(shares.begin() + x, shares.begin() + stop, body_share);
      x = stop;
      continue;
    }
    const auto c = static_cast<float>(sampled_coverage(solid, centre, frame));
    float& share = shares[static_cast<std::size_t>(x)];
    share = (1 - c) * share + c * body_share;
    ++x;
  }
}

}  // namespace halfmark
