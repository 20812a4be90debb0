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
};

// Sections across `axis`; with window_mm a square that lies wholly in the volume and is at least 80 % part.
// Sections of less than a tenth of the largest section's area are passed over. Nothing: no window fits.
std::optional<WorstPlace> worst_section(const PoreField& field, const std::vector<std::uint8_t>& counts,
                                        const PartMap& part, const ZoneSet& zones, std::size_t zone,
                                        const VolumeGeometry& geometry, int axis,
                                        std::optional<double> window_mm);
// A cube or sphere at least 80 % part, moved by an eighth of its size or less.
std::optional<WorstPlace> worst_reference(const PoreField& field, const std::vector<std::uint8_t>& counts,
                                          const PartMap& part, const ZoneSet& zones, std::size_t zone,
                                          const VolumeGeometry& geometry, const ReferenceBody& body);

}  // namespace halfmark
