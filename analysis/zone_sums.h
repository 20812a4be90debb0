// Sums of pore share and part voxels over zones and over cells of a grid, all from runs: no voxel is read
// again.
#pragma once

#include <array>
#include <cstdint>
#include <functional>
#include <vector>

#include "analysis/part_map.h"
#include "analysis/pores.h"
#include "analysis/zones.h"

namespace halfmark {

struct ZoneSums {
  std::int64_t part_voxels = 0;    // of PartMap::inside in the zone: pores and material
  std::vector<std::int64_t> pore;  // per pore id ([0] unused): summed fraction, in 1/PoreField::unit
};

ZoneSums sum_zone(const PoreField& field, std::size_t pore_count, const PartMap& part, const ZoneSet& zones,
                  std::size_t zone);

// The same over the voxels for which holds(x, y, z).
ZoneSums sum_zone_where(const PoreField& field, std::size_t pore_count, const PartMap& part,
                        const ZoneSet& zones, std::size_t zone,
                        const std::function<bool(std::int64_t, std::int64_t, std::int64_t)>& holds);

// A grid of cells over the volume; sums of one zone.
struct CellSums {
  std::array<std::int64_t, 3> cell{1, 1, 1}, count{};  // voxels a cell; cells
  std::vector<std::int64_t> pore, part;                // x fastest
  std::size_t at(std::int64_t x, std::int64_t y, std::int64_t z) const {
    return static_cast<std::size_t>((z * count[1] + y) * count[0] + x);
  }
};

// counts: per pore id, 1 if the pore counts.
CellSums sum_cells(const PoreField& field, const std::vector<std::uint8_t>& counts, const PartMap& part,
                   const ZoneSet& zones, std::size_t zone, const std::array<std::int64_t, 3>& cell);

}  // namespace halfmark
