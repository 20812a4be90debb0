// Labelled runs of voxels sorted into cubic blocks, to find the run nearest to a pore. Used by
// pore_spacing.h for gaps between pores and for the way to the part's surface.
#pragma once

#include <array>
#include <cstdint>
#include <functional>
#include <limits>
#include <span>
#include <vector>

#include "analysis/pore_runs.h"
#include "io/vec3.h"

namespace halfmark {

struct LabelledRun {
  VoxelRun voxels;
  std::int32_t label = 0;
};

// The gap between two voxels whose centres lie `apart`, mm: the distance of the centres less half a voxel at
// each end, where a voxel reaches from its centre as an octahedron does to its faces (half a voxel along an
// axis, less in between), for a voxel at a border lies half outside on average.
double voxel_gap_mm(const Vec3& apart_mm, const Vec3& spacing_mm);

class RunGrid {
 public:
  // Appends the runs of plane z; called from several threads.
  using PlaneRuns = std::function<void(std::int64_t z, std::vector<LabelledRun>& out)>;

  RunGrid(const std::array<std::int64_t, 3>& size, const Vec3& spacing_mm, const PlaneRuns& plane_runs);

  struct Nearest {
    double gap_mm = std::numeric_limits<double>::infinity();
    std::int32_t label = 0;  // 0: none
  };
  // The nearest run of another label than `own`; of equal gaps the smallest label. of: not empty, ordered by
  // z.
  Nearest nearest(std::span<const VoxelRun> of, std::int32_t own) const;
  // For each label but `own` whose gap is at most reach_mm: label and gap, by rising label.
  std::vector<Nearest> within(std::span<const VoxelRun> of, std::int32_t own, double reach_mm) const;

 private:
  // Calls visit(run) for runs of other labels that may lie within reach_mm, nearer blocks first; visit may
  // lower reach_mm.
  template <class Visit>
  void search(std::span<const VoxelRun> of, std::int32_t own, const double& reach_mm, Visit visit) const;

  // A run inside its block.
  struct PackedRun {
    std::uint8_t first = 0, last = 0, y = 0, z = 0;  // voxels from the block's corner
    std::int32_t label = 0;
  };
  struct Layer {                       // the blocks of one z
    std::vector<std::uint32_t> start;  // first run of each block, x fastest; one more at the end
    std::vector<PackedRun> runs;
  };
  void fill_layer(std::int64_t layer, const std::vector<LabelledRun>& runs);

  Vec3 spacing_;
  std::int64_t edge_ = 16;  // of a block, voxels; at most 256
  std::array<std::int64_t, 3> blocks_{};
  std::vector<Layer> layers_;
};

}  // namespace halfmark
