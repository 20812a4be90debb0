// Zones of the spec on the voxels: row intervals for sums, points for pore centres.
#pragma once

#include <memory>
#include <string>
#include <vector>

#include "analysis/part_map.h"
#include "io/inspection_spec.h"

namespace halfmark {

class ZoneSet {
 public:
  // Throws Problem(bad_data): a zone wholly outside the volume, an empty zone, a mesh that is not closed.
  ZoneSet(const InspectionSpec& spec, const VolumeGeometry& geometry, const PartMap& part,
          const RunControl& control = {});
  ~ZoneSet();

  std::size_t count() const;
  const ZoneSpec& spec(std::size_t zone) const;
  std::size_t index_of(const std::string& id) const;  // throws Problem(bad_data) for an unknown id

  bool contains(std::size_t zone, const Vec3& mm) const;
  bool left_out(const Vec3& mm) const;  // in an excluded or expected-void zone
  // The x intervals of row (y, z) whose voxel centres lie in the zone and in no excluded or expected-void
  // zone.
  void row_intervals(std::size_t zone, std::int64_t y, std::int64_t z, std::vector<Run>& out) const;

 private:
  struct Detail;
  std::unique_ptr<Detail> detail_;
};

}  // namespace halfmark
