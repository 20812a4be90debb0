// Connected components of a run mask: unions of overlapping runs in neighbouring rows, slabs in parallel,
// slab seams last.
#include <tbb/parallel_for.h>

#include <algorithm>
#include <cstdint>
#include <numeric>

#include "analysis/mask_morphology.h"

namespace halfmark {

namespace {

// Planes united by one task before the seams are.
constexpr std::int64_t slab_planes = 32;

class Unions {
 public:
  explicit Unions(std::size_t count) : parent_(count) {
    std::iota(parent_.begin(), parent_.end(), std::uint32_t{0});
  }

  std::uint32_t root(std::uint32_t i) {
    while (parent_[i] != i) {
      parent_[i] = parent_[parent_[i]];
      i = parent_[i];
    }
    return i;
  }
  // The smaller index becomes the root, so that a component's root is its first run.
  void unite(std::uint32_t a, std::uint32_t b) {
    a = root(a);
    b = root(b);
    if (a < b) {
      parent_[b] = a;
    } else {
      parent_[a] = b;
    }
  }

 private:
  std::vector<std::uint32_t> parent_;
};

struct RowView {
  std::span<const Run> runs;
  std::uint32_t first = 0;
};

RowView row_of(const RunMask& mask, std::int64_t y, std::int64_t z) {
  return {mask.row(y, z), static_cast<std::uint32_t>(mask.row_begin(y, z))};
}

// Unites runs of two rows that overlap; reach 1: that touch at a corner too.
void unite_rows(const RowView& a, const RowView& b, std::int32_t reach, Unions& unions) {
  std::size_t i = 0, j = 0;
  while (i < a.runs.size() && j < b.runs.size()) {
    const Run& p = a.runs[i];
    const Run& q = b.runs[j];
    if (p.begin < q.end + reach && q.begin < p.end + reach) {
      unions.unite(a.first + static_cast<std::uint32_t>(i), b.first + static_cast<std::uint32_t>(j));
    }
    if (p.end < q.end) {
      ++i;
    } else {
      ++j;
    }
  }
}

void unite_with_row_before(const RunMask& mask, std::int64_t y, std::int64_t z, int connectivity,
                           Unions& unions) {
  if (y > 0) unite_rows(row_of(mask, y, z), row_of(mask, y - 1, z), connectivity == 6 ? 0 : 1, unions);
}

void unite_with_plane_before(const RunMask& mask, std::int64_t y, std::int64_t z, int connectivity,
                             Unions& unions) {
  if (z == 0) return;
  const RowView row = row_of(mask, y, z);
  unite_rows(row, row_of(mask, y, z - 1), connectivity == 6 ? 0 : 1, unions);
  if (connectivity == 6) return;
  const std::int32_t reach = connectivity == 26 ? 1 : 0;
  if (y > 0) unite_rows(row, row_of(mask, y - 1, z - 1), reach, unions);
  if (y + 1 < mask.size()[1]) unite_rows(row, row_of(mask, y + 1, z - 1), reach, unions);
}

}  // namespace

Components connected_components(const RunMask& mask, int connectivity) {
  const auto& size = mask.size();
  Unions unions(mask.runs().size());
  const std::int64_t slabs = (size[2] + slab_planes - 1) / slab_planes;
  tbb::parallel_for(std::int64_t{0}, slabs, [&](std::int64_t slab) {
    const std::int64_t begin = slab * slab_planes, end = std::min(begin + slab_planes, size[2]);
    for (std::int64_t z = begin; z < end; ++z) {
      for (std::int64_t y = 0; y < size[1]; ++y) {
        unite_with_row_before(mask, y, z, connectivity, unions);
        if (z > begin) unite_with_plane_before(mask, y, z, connectivity, unions);
      }
    }
  });
  for (std::int64_t slab = 1; slab < slabs; ++slab) {
    for (std::int64_t y = 0; y < size[1]; ++y)
      unite_with_plane_before(mask, y, slab * slab_planes, connectivity, unions);
  }

  Components out{RunLabels(size), 0};
  std::vector<std::int32_t> label_of_run(mask.runs().size());
  std::uint32_t index = 0;
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (const Run& run : mask.row(y, z)) {
        const std::uint32_t root = unions.root(index);
        label_of_run[index] = root == index ? ++out.count : label_of_run[root];
        out.labels.add_run({run.begin, run.end, label_of_run[index]});
        ++index;
      }
      out.labels.end_row();
    }
  }
  return out;
}

}  // namespace halfmark
