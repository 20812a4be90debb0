#include <cmath>
#include <cstdint>
#include <map>
#include <random>
#include <vector>

#include "analysis/mask_morphology.h"
#include "tests/support/catch.h"

using namespace halfmark;

namespace {

using Size = std::array<std::int64_t, 3>;
using Flags = std::vector<std::uint8_t>;

RunMask mask_of(const Flags& flags, const Size& size) {
  RunMask mask(size);
  for (std::int64_t r = 0; r < size[1] * size[2]; ++r)
    add_row_of_flags(mask, flags.data() + r * size[0], size[0]);
  return mask;
}

Flags flags_of(const RunMask& mask) {
  const Size& size = mask.size();
  Flags flags(static_cast<std::size_t>(size[0] * size[1] * size[2]), 0);
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (const Run& run : mask.row(y, z)) {
        for (std::int32_t x = run.begin; x < run.end; ++x)
          flags[static_cast<std::size_t>((z * size[1] + y) * size[0] + x)] = 1;
      }
    }
  }
  return flags;
}

Flags random_flags(const Size& size, double share, std::uint32_t seed) {
  std::mt19937 random(seed);
  Flags flags(static_cast<std::size_t>(size[0] * size[1] * size[2]));
  for (auto& flag : flags) flag = static_cast<double>(random() % 10000) < share * 10000;
  return flags;
}

// Every voxel against every set voxel; `border_set`: everything beyond the volume is set.
Flags naive_dilation(const Flags& flags, const Size& size, double radius, const Vec3& spacing,
                     bool border_set) {
  Flags out(flags.size(), 0);
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (std::int64_t x = 0; x < size[0]; ++x) {
        bool hit = false;
        const std::int64_t reach = 7;
        for (std::int64_t dz = -reach; dz <= reach && !hit; ++dz) {
          for (std::int64_t dy = -reach; dy <= reach && !hit; ++dy) {
            for (std::int64_t dx = -reach; dx <= reach && !hit; ++dx) {
              const Vec3 d{dx * spacing[0], dy * spacing[1], dz * spacing[2]};
              if (dot(d, d) > radius * radius * (1 + 1e-9)) continue;
              const std::int64_t qx = x + dx, qy = y + dy, qz = z + dz;
              const bool within =
                  qx >= 0 && qy >= 0 && qz >= 0 && qx < size[0] && qy < size[1] && qz < size[2];
              hit = within ? flags[static_cast<std::size_t>((qz * size[1] + qy) * size[0] + qx)] != 0
                           : border_set;
            }
          }
        }
        out[static_cast<std::size_t>((z * size[1] + y) * size[0] + x)] = hit;
      }
    }
  }
  return out;
}

// Labels by repeated flooding, numbered by first voxel.
std::vector<std::int32_t> naive_components(const Flags& flags, const Size& size, int connectivity) {
  std::vector<std::int32_t> labels(flags.size(), 0);
  std::int32_t count = 0;
  for (std::size_t start = 0; start < flags.size(); ++start) {
    if (flags[start] == 0 || labels[start] != 0) continue;
    std::vector<std::size_t> open{start};
    labels[start] = ++count;
    while (!open.empty()) {
      const auto at = static_cast<std::int64_t>(open.back());
      open.pop_back();
      const std::int64_t x = at % size[0], y = at / size[0] % size[1], z = at / (size[0] * size[1]);
      for (std::int64_t d = 0; d < 27; ++d) {
        const std::int64_t dx = d % 3 - 1, dy = d / 3 % 3 - 1, dz = d / 9 - 1;
        const std::int64_t steps = std::abs(dx) + std::abs(dy) + std::abs(dz);
        if (steps == 0 || steps > (connectivity == 6 ? 1 : connectivity == 18 ? 2 : 3)) continue;
        const std::int64_t qx = x + dx, qy = y + dy, qz = z + dz;
        if (qx < 0 || qy < 0 || qz < 0 || qx >= size[0] || qy >= size[1] || qz >= size[2]) continue;
        const auto q = static_cast<std::size_t>((qz * size[1] + qy) * size[0] + qx);
        if (flags[q] != 0 && labels[q] == 0) {
          labels[q] = count;
          open.push_back(q);
        }
      }
    }
  }
  return labels;
}

}  // namespace

TEST_CASE("rows of flags become runs and back") {
  for (const std::int64_t width : {1, 7, 8, 63, 64, 65, 130}) {
    for (std::uint32_t seed = 0; seed < 20; ++seed) {
      const Size size{width, 3, 2};
      const Flags flags = random_flags(size, seed / 19.0, seed);
      CAPTURE(width, seed);
      CHECK(flags_of(mask_of(flags, size)) == flags);
    }
  }
}

TEST_CASE("dilation and erosion equal the comparison of every pair of voxels") {
  const Size size{70, 9, 68};  // wider than one tile along x and z
  for (const double radius : {1.5, 4.3}) {
    for (const Vec3& spacing : {Vec3{1, 1, 1}, Vec3{1, 1, 1.25}, Vec3{0.7, 1.1, 0.9}}) {
      const Flags flags = random_flags(size, 0.003, 5);
      CAPTURE(radius, spacing[0], spacing[2]);
      CHECK(flags_of(dilate(mask_of(flags, size), radius, spacing)) ==
            naive_dilation(flags, size, radius, spacing, false));
      Flags inverse(flags.size());
      for (std::size_t i = 0; i < flags.size(); ++i) inverse[i] = flags[i] == 0;
      for (const bool border_inside : {true, false}) {
        Flags expected = naive_dilation(flags, size, radius, spacing, !border_inside);
        for (auto& flag : expected) flag = flag == 0;
        CHECK(flags_of(erode(mask_of(inverse, size), radius, spacing, border_inside)) == expected);
      }
    }
  }
}

TEST_CASE("set algebra equals voxel by voxel logic") {
  const Size size{37, 5, 4};
  for (std::uint32_t seed = 0; seed < 30; ++seed) {
    const Flags a = random_flags(size, 0.5, seed), b = random_flags(size, 0.3, seed + 100);
    const RunMask ma = mask_of(a, size), mb = mask_of(b, size);
    Flags both(a.size()), either(a.size()), only(a.size()), none(a.size());
    for (std::size_t i = 0; i < a.size(); ++i) {
      both[i] = a[i] & b[i];
      either[i] = a[i] | b[i];
      only[i] = a[i] & !b[i];
      none[i] = !a[i];
    }
    CHECK(flags_of(intersection(ma, mb)) == both);
    CHECK(flags_of(union_of(ma, mb)) == either);
    CHECK(flags_of(difference(ma, mb)) == only);
    CHECK(flags_of(complement(ma)) == none);
    CHECK(flags_of(padded(padded(ma, 3), -3)) == a);
  }
}

TEST_CASE("components equal those found by flooding") {
  const Size size{11, 7, 70};  // over several slabs
  for (const int connectivity : {6, 18, 26}) {
    for (std::uint32_t seed = 0; seed < 12; ++seed) {
      const Flags flags = random_flags(size, 0.05 + 0.04 * seed, seed);
      const Components found = connected_components(mask_of(flags, size), connectivity);
      const auto expected = naive_components(flags, size, connectivity);
      std::vector<std::int32_t> labels(flags.size(), 0);
      for (std::int64_t z = 0; z < size[2]; ++z) {
        for (std::int64_t y = 0; y < size[1]; ++y) {
          for (const LabelRun& run : found.labels.row(y, z)) {
            for (std::int32_t x = run.begin; x < run.end; ++x)
              labels[static_cast<std::size_t>((z * size[1] + y) * size[0] + x)] = run.label;
          }
        }
      }
      CAPTURE(connectivity, seed);
      CHECK(labels == expected);
    }
  }
}
