// The worst section and the worst place of a moving reference body.
#pragma once

#include <optional>

#include "analysis/zone_sums.h"
#include "io/inspection_spec.h"

namespace halfmark {

struct WorstPlace {
  double percent = 0;
  Vec3 index{};  // middle of the section, window or body
  double extent_mm = 0;
  int axis = 0;  // sections
  // The voxels: [begin, end) along x, y, z; of a ball those whose cells' middles lie within ball_radius_mm of
  // the middle.
  std::array<std::int64_t, 3> begin{}, end{}, cell{1, 1, 1};
  double ball_radius_mm = 0;  // 0: the whole box
  Vec3 spacing_mm{1, 1, 1};
};

// Sections across `axis`; with window_mm a square that lies wholly in the volume and is at least 80 % part.
// Sections of less than a tenth of the largest section's area are passed over. Nothing: no window fits.
std::optional<WorstPlace> worst_section(const PoreField& field, const std::vector<std::uint8_t>& counts,
                                        const PartMap& part, const ZoneSet& zones, std::size_t zone,
                                        const VolumeGeometry& geometry, int axis,
                                        std::optional<double> window_mm);
// A cube or sphere that lies wholly in the volume and is at least 80 % part, moved by an eighth of its size
// or less. Its size is met to the nearest voxel, or to 1 % where the body is larger than 100 voxels.
std::optional<WorstPlace> worst_reference(const PoreField& field, const std::vector<std::uint8_t>& counts,
                                          const PartMap& part, const ZoneSet& zones, std::size_t zone,
                                          const VolumeGeometry& geometry, const ReferenceBody& body);

// The sums of the zone within that place.
ZoneSums sum_place(const PoreField& field, std::size_t pore_count, const PartMap& part, const ZoneSet& zones,
                   std::size_t zone, const WorstPlace& place);

}  // namespace halfmark
