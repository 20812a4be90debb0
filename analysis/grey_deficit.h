// The grey deficit: by how much a voxel is darker than the part would show it without pores, as a share of
// the contrast. 1 is a fully empty voxel, negative values are noise or denser material.
//
// Without pores a voxel shows air + p (level - air), p the part's own blurred coverage. p is 1 but for a band
// under the outer face, where the coverage of `inside`, with sub-voxel shares at its border taken from the
// grey values there, is blurred by the scan's measured Gaussian.
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/field_of_view.h"
#include "analysis/grey_levels.h"
#include "analysis/material_level.h"
#include "analysis/part_map.h"

namespace halfmark {

struct VoxelBox {
  std::array<std::int64_t, 3> begin{}, end{};
  std::int64_t extent(std::size_t axis) const { return end[axis] - begin[axis]; }
  std::int64_t voxels() const { return extent(0) * extent(1) * extent(2); }
  VoxelBox grown(const std::array<std::int64_t, 3>& by) const {
    VoxelBox out = *this;
    for (std::size_t a = 0; a < 3; ++a) {
      out.begin[a] -= by[a];
      out.end[a] += by[a];
    }
    return out;
  }
};

// DeficitBlock::usable of a voxel so deep below the face that nothing of the face is left in its deficit.
constexpr std::uint8_t clear_of_face = 2;

struct DeficitBlock {
  VoxelBox box;                // may reach beyond the volume, whose last voxels continue there
  std::vector<float> deficit;  // x fastest
  // 1: inside the part, and far enough below its face or darker than ISO-50; 2: clear of the face.
  std::vector<std::uint8_t> usable;
  bool deep = true;                   // every voxel inside and below the band
  std::vector<float> coverage, line;  // working memory
  std::vector<std::uint8_t> flags;
};

// Planes of grey values that the deficit is taken from.
struct GreyPlanes {
  const std::byte* voxels = nullptr;  // planes [z_begin, z_end)
  std::int64_t z_begin = 0, z_end = 0;
};

class GreyDeficit {
 public:
  GreyDeficit(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
              const PartMap& part, const MaterialLevel& level);

  // Voxels that planes must reach beyond a box in z.
  std::int64_t reach() const { return band_[2]; }
  // False if the box holds no voxel of the part: then the block is not filled.
  bool fill(const VoxelBox& box, const GreyPlanes& planes, DeficitBlock& block) const;

 private:
  template <class T>
  void fill_typed(const GreyPlanes& planes, DeficitBlock& block) const;
  template <class T>
  void cover_border(const GreyPlanes& planes, const VoxelBox& box, DeficitBlock& block) const;

  const VolumeSource& source_;
  const FieldOfView& field_;
  const GreyLevels& levels_;
  const PartMap& part_;
  const MaterialLevel& level_;
  std::array<std::int64_t, 3> band_{};        // voxels within which the face shows
  std::array<std::vector<float>, 3> kernel_;  // half kernels of the scan's blur
  double edge_width_ = 1;                     // Gaussian width of an edge, voxels
};

// A deficit times PoreField::unit as an integer, within +-32000. Written so that compilers find no branch.
inline std::int32_t fraction_of(float scaled) {
  const float above = scaled > -32000.0f ? scaled : -32000.0f;
  const float within = above < 32000.0f ? above : 32000.0f;
  return static_cast<std::int32_t>(within + 32768.5f) - 32768;
}

// Smooths a block in place by symmetric half kernels along x, y, z; the outer kernel reach of the block is
// not valid afterwards. Elementwise: the same bits on every machine.
void smooth_block(std::vector<float>& values, const VoxelBox& box,
                  const std::array<std::vector<float>, 3>& kernel, std::vector<float>& line);
// Half of a normalised Gaussian, weights [0 .. ceil(reach * sigma)].
std::vector<float> half_gaussian(double sigma, double reach);

}  // namespace halfmark
