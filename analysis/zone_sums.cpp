#include "analysis/zone_sums.h"

#include <algorithm>

namespace halfmark {

namespace {

// Calls f(begin, end, offset into the first run's voxels) for the common stretches of a run and the
// intervals.
template <class F>
void for_common(std::int32_t begin, std::int32_t end, const std::vector<Run>& intervals, F&& f) {
  for (const Run& i : intervals) {
    const std::int32_t b = std::max(begin, i.begin), e = std::min(end, i.end);
    if (b < e) f(b, e);
  }
}

template <class Pore, class Part>
void for_zone(const PoreField& field, const PartMap& part, const ZoneSet& zones, std::size_t zone,
              Pore&& pore, Part&& part_run) {
  const auto& size = part.inside.size();
  std::vector<Run> intervals;
  std::size_t first = 0;
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      const auto inside = part.inside.row(y, z);
      const auto windows = field.windows.row(y, z);
      if (inside.empty() && windows.empty()) continue;
      zones.row_intervals(zone, y, z, intervals);
      for (const Run& run : inside) {
        for_common(run.begin, run.end, intervals,
                   [&](std::int32_t b, std::int32_t e) { part_run(y, z, b, e); });
      }
      for (const LabelRun& run : windows) {
        for_common(run.begin, run.end, intervals, [&](std::int32_t b, std::int32_t e) {
          pore(y, z, b, e, run.label, first + static_cast<std::size_t>(b - run.begin));
        });
        first += static_cast<std::size_t>(run.end - run.begin);
      }
    }
  }
}

}  // namespace

ZoneSums sum_zone(const PoreField& field, std::size_t pore_count, const PartMap& part, const ZoneSet& zones,
                  std::size_t zone) {
  ZoneSums out;
  out.pore.assign(pore_count + 1, 0);
  for_zone(
      field, part, zones, zone,
      [&](std::int64_t, std::int64_t, std::int32_t b, std::int32_t e, std::int32_t label, std::size_t at) {
        std::int64_t sum = 0;
        for (std::int32_t x = b; x < e; ++x) sum += field.fraction[at++];
        out.pore[static_cast<std::size_t>(label)] += sum;
      },
      [&](std::int64_t, std::int64_t, std::int32_t b, std::int32_t e) { out.part_voxels += e - b; });
  return out;
}

ZoneSums sum_zone_where(const PoreField& field, std::size_t pore_count, const PartMap& part,
                        const ZoneSet& zones, std::size_t zone,
                        const std::function<bool(std::int64_t, std::int64_t, std::int64_t)>& holds) {
  ZoneSums out;
  out.pore.assign(pore_count + 1, 0);
  for_zone(
      field, part, zones, zone,
      [&](std::int64_t y, std::int64_t z, std::int32_t b, std::int32_t e, std::int32_t label,
          std::size_t at) {
        for (std::int32_t x = b; x < e; ++x, ++at) {
          if (holds(x, y, z)) out.pore[static_cast<std::size_t>(label)] += field.fraction[at];
        }
      },
      [&](std::int64_t y, std::int64_t z, std::int32_t b, std::int32_t e) {
        for (std::int32_t x = b; x < e; ++x) out.part_voxels += holds(x, y, z);
      });
  return out;
}

CellSums sum_cells(const PoreField& field, const std::vector<std::uint8_t>& counts, const PartMap& part,
                   const ZoneSet& zones, std::size_t zone, const std::array<std::int64_t, 3>& cell) {
  CellSums out;
  out.cell = cell;
  for (std::size_t a = 0; a < 3; ++a) out.count[a] = (part.inside.size()[a] + cell[a] - 1) / cell[a];
  const auto cells = static_cast<std::size_t>(out.count[0] * out.count[1] * out.count[2]);
  out.pore.assign(cells, 0);
  out.part.assign(cells, 0);
  for_zone(
      field, part, zones, zone,
      [&](std::int64_t y, std::int64_t z, std::int32_t b, std::int32_t e, std::int32_t label,
          std::size_t at) {
        if (counts[static_cast<std::size_t>(label)] == 0) return;
        for (std::int32_t x = b; x < e; ++x)
          out.pore[out.at(x / cell[0], y / cell[1], z / cell[2])] += field.fraction[at++];
      },
      [&](std::int64_t y, std::int64_t z, std::int32_t b, std::int32_t e) {
        for (std::int64_t x = b; x < e;) {
          const std::int64_t next = std::min<std::int64_t>(e, (x / cell[0] + 1) * cell[0]);
          out.part[out.at(x / cell[0], y / cell[1], z / cell[2])] += next - x;
          x = next;
        }
      });
  return out;
}

}  // namespace halfmark
