#include "analysis/peak_tree.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <array>
#include <climits>
#include <cmath>
#include <cstdint>

#include "analysis/mask_morphology.h"

namespace halfmark {

namespace {

// Where a voxel's runs begin in the list of values.
struct VoxelIndex {
  const RunMask& mask;
  std::vector<std::int64_t> first_voxel;  // per run: number of its first voxel

  explicit VoxelIndex(const RunMask& m) : mask(m) {
    std::int64_t n = 0;
    first_voxel.reserve(m.runs().size());
    for (const Run& run : m.runs()) {
      first_voxel.push_back(n);
      n += run.end - run.begin;
    }
  }
};

struct Voxel {
  std::int32_t x, y, z;
  float value;
  std::int64_t index;
};

struct Tree {
  float peak = 0;
  std::int32_t parent = 0;  // itself: a root
  bool dropped = false;     // a bump of another's tail
};

// Boxes of at most this many voxels per voxel of the component are held as an array.
constexpr std::int64_t dense_box_share = 64;

// The trees of a component's voxels as an array over its box, one voxel of margin around, where that is not
// much larger than the component itself.
class DenseTrees {
 public:
  explicit DenseTrees(const std::vector<Voxel>& voxels) {
    std::array<std::int32_t, 3> last{INT32_MIN, INT32_MIN, INT32_MIN};
    for (const Voxel& v : voxels) {
      const std::array<std::int32_t, 3> at{v.x, v.y, v.z};
      for (std::size_t a = 0; a < 3; ++a) {
        first_[a] = std::min(first_[a], at[a] - 1);
        last[a] = std::max(last[a], at[a] + 1);
      }
    }
    std::int64_t box = 1;
    for (std::size_t a = 0; a < 3; ++a) {
      extent_[a] = last[a] - first_[a] + 1;
      box *= extent_[a];
    }
    if (box <= dense_box_share * static_cast<std::int64_t>(voxels.size()))
      tree_.assign(static_cast<std::size_t>(box), 0);
  }
  bool in_use() const { return !tree_.empty(); }
  void set(const Voxel& v, std::int32_t tree) { tree_[static_cast<std::size_t>(place(v))] = tree; }
  // Calls f(tree) for every neighbour that has one, in rising z, y, x.
  template <class F>
  void for_neighbours(const Voxel& v, const F& f) const {
    const std::int64_t middle = place(v);
    for (std::int64_t dz = -1; dz <= 1; ++dz) {
      for (std::int64_t dy = -1; dy <= 1; ++dy) {
        const std::int32_t* row = tree_.data() + middle + (dz * extent_[1] + dy) * extent_[0];
        for (std::int64_t dx = -1; dx <= 1; ++dx) {
          if (row[dx] != 0) f(row[dx]);
        }
      }
    }
  }

 private:
  std::int64_t place(const Voxel& v) const {
    return ((v.z - first_[2]) * extent_[1] + (v.y - first_[1])) * extent_[0] + (v.x - first_[0]);
  }
  std::array<std::int32_t, 3> first_{INT32_MAX, INT32_MAX, INT32_MAX};
  std::array<std::int64_t, 3> extent_{};
  std::vector<std::int32_t> tree_;
};

class Component {
 public:
  Component(const std::vector<Voxel>& voxels, const VoxelIndex& index, double seed_threshold,
            std::vector<std::int32_t>& tree_of, std::vector<std::uint8_t>& is_label)
      : dense_(voxels),
        index_(index),
        seed_(static_cast<float>(seed_threshold)),
        tree_of_(tree_of),
        is_label_(is_label) {}

  // tree_of receives the component's own tree numbers (from 1); afterwards root() tells the final tree.
  void grow(std::vector<Voxel>& voxels) {
    std::sort(voxels.begin(), voxels.end(), [](const Voxel& a, const Voxel& b) {
      return a.value != b.value ? a.value > b.value : a.index < b.index;
    });
    for (const Voxel& voxel : voxels) add(voxel);
  }
  std::int32_t root(std::int32_t tree) {
    for (;;) {
      Tree& t = trees_[static_cast<std::size_t>(tree)];
      const Tree& up = trees_[static_cast<std::size_t>(t.parent)];
      if (t.parent == tree) return tree;
      // Passing over a dropped bump keeps what hung below it a tail.
      t.dropped = t.dropped || (up.dropped && up.parent != t.parent);
      t.parent = up.parent;
      tree = t.parent;
    }
  }
  const std::vector<Tree>& trees() const { return trees_; }

 private:
  static float half_of(const Tree& tree) { return 0.5f * std::min(tree.peak, 1.0f); }

  void add(const Voxel& voxel) {
    const float value = voxel.value;
    neighbours_.clear();
    collect_neighbours(voxel);
    std::int32_t growing = 0, finished = 0;
    for (const std::int32_t t : neighbours_) {
      const bool grows = value >= half_of(trees_[static_cast<std::size_t>(t)]);
      if (!grows) {
        if (finished == 0 ||
            trees_[static_cast<std::size_t>(t)].peak > trees_[static_cast<std::size_t>(finished)].peak)
          finished = t;
        continue;
      }
      if (growing == 0) {
        growing = t;
      } else {
        growing = join(growing, t);
      }
    }
    if (growing != 0 && finished != 0 && trees_[static_cast<std::size_t>(growing)].peak - value < seed_) {
      trees_[static_cast<std::size_t>(growing)].dropped = true;
      trees_[static_cast<std::size_t>(growing)].parent = finished;
      growing = 0;
    }
    std::int32_t tree = growing;
    if (tree == 0 && finished == 0) {
      tree = static_cast<std::int32_t>(trees_.size());
      trees_.push_back({value, tree, false});
      growing = tree;
    }
    if (tree == 0) tree = finished;
    tree_of_[static_cast<std::size_t>(voxel.index)] = tree;
    if (dense_.in_use()) dense_.set(voxel, tree);
    is_label_[static_cast<std::size_t>(voxel.index)] = growing != 0;
  }

  std::int32_t join(std::int32_t a, std::int32_t b) {
    if (trees_[static_cast<std::size_t>(b)].peak > trees_[static_cast<std::size_t>(a)].peak) std::swap(a, b);
    trees_[static_cast<std::size_t>(b)].parent = a;
    return a;
  }

  void note_neighbour(std::int32_t tree) {
    const std::int32_t top = root(tree);
    if (std::find(neighbours_.begin(), neighbours_.end(), top) == neighbours_.end())
      neighbours_.push_back(top);
  }

  void collect_neighbours(const Voxel& v) {
    if (dense_.in_use()) return dense_.for_neighbours(v, [&](std::int32_t tree) { note_neighbour(tree); });
    const auto& size = index_.mask.size();
    for (std::int32_t dz = -1; dz <= 1; ++dz) {
      for (std::int32_t dy = -1; dy <= 1; ++dy) {
        const std::int64_t y = v.y + dy, z = v.z + dz;
        if (y < 0 || z < 0 || y >= size[1] || z >= size[2]) continue;
        const auto row = index_.mask.row(y, z);
        auto run = std::upper_bound(row.begin(), row.end(), v.x - 1,
                                    [](std::int32_t x, const Run& r) { return x < r.end; });
        for (; run != row.end() && run->begin <= v.x + 1; ++run) {
          const std::size_t r = index_.mask.row_begin(y, z) + static_cast<std::size_t>(run - row.begin());
          for (std::int32_t x = std::max(run->begin, v.x - 1); x <= std::min(run->end - 1, v.x + 1); ++x) {
            const std::int32_t tree =
                tree_of_[static_cast<std::size_t>(index_.first_voxel[r] + x - run->begin)];
            if (tree != 0) note_neighbour(tree);
          }
        }
      }
    }
  }

  DenseTrees dense_;
  const VoxelIndex& index_;
  float seed_;
  std::vector<std::int32_t>& tree_of_;
  std::vector<std::uint8_t>& is_label_;
  std::vector<Tree> trees_{Tree{}};
  std::vector<std::int32_t> neighbours_;
};

}  // namespace

GrownPores grow_pores(const PoreCandidates& candidates, const RunControl& control) {
  const RunMask& mask = candidates.mask;
  const Components parts = connected_components(mask, 26);
  const VoxelIndex index(mask);
  const std::size_t voxels = candidates.values.size();
  const auto count = static_cast<std::size_t>(parts.count);

  // Components with a seed, and their runs.
  std::vector<float> peak(count + 1, 0);
  std::vector<std::size_t> runs_of(count + 2, 0);
  for (std::size_t r = 0; r < mask.runs().size(); ++r) {
    const auto label = static_cast<std::size_t>(parts.labels.runs()[r].label);
    ++runs_of[label + 1];
    const auto first = candidates.values.begin() + static_cast<std::ptrdiff_t>(index.first_voxel[r]);
    peak[label] =
        std::max(peak[label], *std::max_element(first, first + (mask.runs()[r].end - mask.runs()[r].begin)));
  }
  for (std::size_t c = 1; c < runs_of.size(); ++c) runs_of[c] += runs_of[c - 1];
  struct PlacedRun {
    std::size_t run;
    std::int32_t y, z;
  };
  std::vector<PlacedRun> placed(mask.runs().size());
  {
    std::vector<std::size_t> next = runs_of;
    std::size_t r = 0;
    for (std::int64_t z = 0; z < mask.size()[2]; ++z) {
      for (std::int64_t y = 0; y < mask.size()[1]; ++y) {
        for (std::size_t i = 0; i < mask.row(y, z).size(); ++i, ++r) {
          placed[next[static_cast<std::size_t>(parts.labels.runs()[r].label)]++] = {
              r, static_cast<std::int32_t>(y), static_cast<std::int32_t>(z)};
        }
      }
    }
  }

  std::vector<std::int32_t> tree_of(voxels, 0);
  std::vector<std::uint8_t> is_label(voxels, 0);
  std::vector<std::vector<float>> tree_peaks(count + 1);  // per component and tree: peak of a pore, else 0
  tbb::parallel_for(std::size_t{1}, count + 1, [&](std::size_t c) {
    if (static_cast<double>(peak[c]) < candidates.seed_threshold || control.cancelled()) return;
    std::vector<Voxel> list;
    for (std::size_t i = runs_of[c]; i < runs_of[c + 1]; ++i) {
      const PlacedRun& p = placed[i];
      const Run& run = mask.runs()[p.run];
      for (std::int32_t x = run.begin; x < run.end; ++x) {
        const std::int64_t at = index.first_voxel[p.run] + x - run.begin;
        list.push_back({x, p.y, p.z, candidates.values[static_cast<std::size_t>(at)], at});
      }
    }
    Component component(list, index, candidates.seed_threshold, tree_of, is_label);
    component.grow(list);
    auto& peaks = tree_peaks[c];
    peaks.assign(component.trees().size(), 0);
    for (std::size_t t = 1; t < peaks.size(); ++t) {
      const Tree& tree = component.trees()[t];
      const bool is_root = tree.parent == static_cast<std::int32_t>(t);
      if (is_root && static_cast<double>(tree.peak) >= candidates.seed_threshold)
        peaks[t] = std::min(tree.peak, 1.0f);
    }
    for (const Voxel& v : list) {
      auto& tree = tree_of[static_cast<std::size_t>(v.index)];
      // Follow joins only: what hangs below a dropped bump is tail.
      std::int32_t t = tree;
      bool tail = is_label[static_cast<std::size_t>(v.index)] == 0;
      while (component.trees()[static_cast<std::size_t>(t)].parent != t) {
        tail = tail || component.trees()[static_cast<std::size_t>(t)].dropped;
        t = component.trees()[static_cast<std::size_t>(t)].parent;
      }
      tree = tail || peaks[static_cast<std::size_t>(t)] == 0 ? 0 : t;
    }
  });
  control.throw_if_cancelled();

  GrownPores out;
  out.peak.push_back(0);
  out.label.assign(voxels, 0);
  for (std::size_t c = 1; c <= count; ++c) {
    std::vector<std::int32_t> number(tree_peaks[c].size(), 0);
    for (std::size_t t = 1; t < tree_peaks[c].size(); ++t) {
      if (tree_peaks[c][t] <= 0) continue;
      number[t] = ++out.count;
      out.peak.push_back(tree_peaks[c][t]);
    }
    if (number.empty()) continue;
    for (std::size_t i = runs_of[c]; i < runs_of[c + 1]; ++i) {
      const Run& run = mask.runs()[placed[i].run];
      for (std::int32_t x = run.begin; x < run.end; ++x) {
        const auto at = static_cast<std::size_t>(index.first_voxel[placed[i].run] + x - run.begin);
        out.label[at] = number[static_cast<std::size_t>(tree_of[at])];
      }
    }
  }
  return out;
}

}  // namespace halfmark
