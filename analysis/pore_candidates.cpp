#include "analysis/pore_candidates.h"

#include <tbb/enumerable_thread_specific.h>
#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>

#include "analysis/block_pass.h"
#include "analysis/quantiles.h"

namespace halfmark {

namespace {

// The smoothing is about as wide as the blur: near the matched filter of a small pore, and no wider, so that
// neighbours stay apart.
constexpr double kernel_share_of_blur = 1.0;
constexpr double least_kernel_voxel = 0.6, most_kernel_voxel = 1.2;
constexpr double kernel_reach = 3;
// A volume of 192 voxels cubed holds about 3e5 independent places of the smoothed noise; a normal value
// exceeds 5.9 standard deviations with 2e-9: an expected 6e-4 false seeds, with room for tails that are not
// quite normal.
constexpr double seed_noises = 5.9;
// Half of the seed threshold: where a seed at the threshold itself stops growing.
constexpr double low_share = 0.5;
// Residual structure (rings, level model, digitised faces) reaches some percent of the contrast whatever the
// noise.
constexpr double least_seed = 0.06;
// Blocks that the noise of the smoothed deficit is measured in, spread evenly.
constexpr std::int64_t noise_blocks = 48;

using Kernels = std::array<std::vector<float>, 3>;

Kernels smoothing_kernels(const VolumeGeometry& geometry, double sigma_voxel) {
  Kernels out;
  for (std::size_t a = 0; a < 3; ++a)
    out[a] = half_gaussian(sigma_voxel * geometry.voxel_mm() / geometry.spacing_mm[a], kernel_reach);
  return out;
}

std::array<std::int64_t, 3> reach_of(const Kernels& kernels) {
  return {static_cast<std::int64_t>(kernels[0].size()) - 1, static_cast<std::int64_t>(kernels[1].size()) - 1,
          static_cast<std::int64_t>(kernels[2].size()) - 1};
}

// The smoothed deficit (times sign) of the box within block.deficit; false where there is no part.
bool smoothed_deficit(const GreyDeficit& deficit, const VoxelBox& box, const GreyPlanes& planes,
                      const Kernels& kernels, int sign, DeficitBlock& block, DeficitCells* cells) {
  if (!deficit.fill(box.grown(reach_of(kernels)), planes, block)) return false;
  if (cells != nullptr) cells->add(block, box);
  if (sign < 0) {
    for (float& d : block.deficit) d = -d;
  }
  smooth_block(block.deficit, block.box, kernels, block.line);
  return true;
}

struct BlockRows {
  std::vector<std::uint32_t> row_runs;  // runs per row, y fastest, then z
  std::vector<Run> runs;
  std::vector<float> values;
};

void collect(const DeficitBlock& block, const VoxelBox& core, float low, BlockRows& out) {
  out.row_runs.clear();
  out.runs.clear();
  out.values.clear();
  const VoxelBox& box = block.box;
  for (std::int64_t z = core.begin[2]; z < core.end[2]; ++z) {
    for (std::int64_t y = core.begin[1]; y < core.end[1]; ++y) {
      const std::int64_t at =
          ((z - box.begin[2]) * box.extent(1) + (y - box.begin[1])) * box.extent(0) - box.begin[0];
      const float* d = block.deficit.data() + at;
      const std::uint8_t* usable = block.usable.data() + at;
      const std::size_t before = out.runs.size();
      for (std::int64_t x = core.begin[0]; x < core.end[0]; ++x) {
        if (d[x] < low || usable[x] == 0) continue;
        const auto x32 = static_cast<std::int32_t>(x);
        if (out.runs.size() > before && out.runs.back().end == x32) {
          ++out.runs.back().end;
        } else {
          out.runs.push_back({x32, x32 + 1});
        }
        out.values.push_back(d[x]);
      }
      out.row_runs.push_back(static_cast<std::uint32_t>(out.runs.size() - before));
    }
  }
}

// Puts the blocks of a layer together, row by row.
void join_layer(const BlockGrid& grid, std::int64_t layer, const std::vector<BlockRows>& blocks,
                PoreCandidates& out) {
  std::vector<std::size_t> next_run(blocks.size(), 0), next_value(blocks.size(), 0);
  const VoxelBox first = grid.box(layer, 0);
  for (std::int64_t z = first.begin[2]; z < first.end[2]; ++z) {
    for (std::int64_t y = 0; y < grid.size[1]; ++y) {
      const std::int64_t by = y / BlockSizes::y;
      Run open{0, -1};
      for (std::int64_t bx = 0; bx < grid.count[0]; ++bx) {
        const auto b = static_cast<std::size_t>(by * grid.count[0] + bx);
        const BlockRows& block = blocks[b];
        if (block.row_runs.empty()) continue;
        const VoxelBox box = grid.box(layer, static_cast<std::int64_t>(b));
        const auto row = static_cast<std::size_t>((z - box.begin[2]) * box.extent(1) + (y - box.begin[1]));
        for (std::uint32_t i = 0; i < block.row_runs[row]; ++i) {
          const Run run = block.runs[next_run[b]++];
          const auto length = static_cast<std::size_t>(run.end - run.begin);
          out.values.insert(out.values.end(),
                            block.values.begin() + static_cast<std::ptrdiff_t>(next_value[b]),
                            block.values.begin() + static_cast<std::ptrdiff_t>(next_value[b] + length));
          next_value[b] += length;
          if (open.end == run.begin) {
            open.end = run.end;
          } else {
            if (open.end >= 0) out.mask.add_run(open);
            open = run;
          }
        }
      }
      if (open.end >= 0) out.mask.add_run(open);
      out.mask.end_row();
    }
  }
}

// Every second voxel along each axis.
void sample_block(const DeficitBlock& block, const VoxelBox& box, std::vector<float>& samples) {
  const VoxelBox& padded = block.box;
  for (std::int64_t z = box.begin[2]; z < box.end[2]; z += 2) {
    for (std::int64_t y = box.begin[1]; y < box.end[1]; y += 2) {
      for (std::int64_t x = box.begin[0]; x < box.end[0]; x += 2) {
        const auto at = static_cast<std::size_t>(
            ((z - padded.begin[2]) * padded.extent(1) + (y - padded.begin[1])) * padded.extent(0) + x -
            padded.begin[0]);
        if (block.usable[at] != 0) samples.push_back(block.deficit[at]);
      }
    }
  }
}

// Standard deviation of the smoothed deficit in sound material, from its lower side: pores only raise it.
double measure_noise(const VolumeSource& source, const GreyDeficit& deficit, const Kernels& kernels, int sign,
                     const RunControl& control) {
  const BlockGrid grid(source.geometry().size);
  const std::int64_t blocks = grid.per_layer() * grid.count[2];
  const std::int64_t stride = std::max<std::int64_t>(1, blocks / noise_blocks);
  const auto halo = deficit.reach() + reach_of(kernels)[2];
  std::vector<float> samples;
  std::vector<std::vector<float>> of_block(static_cast<std::size_t>((blocks + stride - 1) / stride));
  tbb::enumerable_thread_specific<DeficitBlock> working;
  for (const bool only_deep : {true, false}) {
    tbb::parallel_for(std::size_t{0}, of_block.size(), [&](std::size_t n) {
      of_block[n].clear();
      const std::int64_t i = stride / 2 + static_cast<std::int64_t>(n) * stride;
      if (i >= blocks || control.cancelled()) return;
      const VoxelBox box = grid.box(i / grid.per_layer(), i % grid.per_layer());
      SlabReader reader(source);
      GreyPlanes planes;
      planes.z_begin = std::max<std::int64_t>(0, box.begin[2] - halo);
      planes.z_end = std::min(grid.size[2], box.end[2] + halo);
      visit_voxel_type(source.voxel_type(), [&](auto* type) {
        planes.voxels = reinterpret_cast<const std::byte*>(
            reader.planes<std::remove_pointer_t<decltype(type)>>(planes.z_begin, planes.z_end));
      });
      DeficitBlock& block = working.local();
      if (!smoothed_deficit(deficit, box, planes, kernels, sign, block, nullptr) ||
          (only_deep && !block.deep))
        return;
      sample_block(block, box, of_block[n]);
    });
    control.throw_if_cancelled();
    samples.clear();
    for (const auto& some : of_block) samples.insert(samples.end(), some.begin(), some.end());
    if (samples.size() > 20000) break;
  }
  if (samples.size() < 100) return 0;
  return lower_side_deviation(samples);
}

}  // namespace

PoreCandidates find_candidates(const VolumeSource& source, const GreyDeficit& deficit,
                               const GreyLevels& levels, int sign, const RunControl& control) {
  const VolumeGeometry& geometry = source.geometry();
  PoreCandidates out;
  out.kernel_voxel =
      std::clamp(kernel_share_of_blur * levels.blur_voxel, least_kernel_voxel, most_kernel_voxel);
  const Kernels kernels = smoothing_kernels(geometry, out.kernel_voxel);
  const double noise = 1 / levels.contrast_to_noise;
  double white = noise * noise;
  for (const auto& kernel : kernels) {
    double squares = 0;
    for (std::size_t k = 0; k < kernel.size(); ++k)
      squares += (k == 0 ? 1 : 2) * static_cast<double>(kernel[k]) * static_cast<double>(kernel[k]);
    white *= squares;
  }
  out.smoothed_noise =
      std::max(measure_noise(source, deficit, kernels, sign, control), 0.5 * std::sqrt(white));
  out.white_ratio = std::max(1.0, out.smoothed_noise * out.smoothed_noise / white);
  out.seed_threshold = std::max(seed_noises * out.smoothed_noise, least_seed);
  out.low_threshold = low_share * out.seed_threshold;

  const BlockGrid grid(geometry.size);
  out.mask = RunMask(geometry.size);
  if (sign > 0) out.cells = DeficitCells(geometry.size);
  std::vector<BlockRows> layer_blocks(static_cast<std::size_t>(grid.per_layer()));
  tbb::enumerable_thread_specific<DeficitBlock> blocks;
  for_blocks(
      source, deficit.reach() + reach_of(kernels)[2], control,
      [&](std::int64_t, std::int64_t b, const VoxelBox& box, const GreyPlanes& planes) {
        BlockRows& rows = layer_blocks[static_cast<std::size_t>(b)];
        DeficitBlock& block = blocks.local();
        rows = {};
        if (smoothed_deficit(deficit, box, planes, kernels, sign, block, sign > 0 ? &out.cells : nullptr))
          collect(block, box, static_cast<float>(out.low_threshold), rows);
      },
      [&](std::int64_t layer) {
        join_layer(grid, layer, layer_blocks, out);
        control.step("pores", 0.5 * static_cast<double>(layer + 1) / static_cast<double>(grid.count[2]));
      });
  return out;
}

}  // namespace halfmark
