// Many solids as one, found by place: the signed distance of a union of hundreds of parts from the few near
// the point. Used by united() and subtracted().
#pragma once

#include <array>
#include <cstdint>
#include <vector>

#include "analysis/solids.h"

namespace halfmark {

class SolidCrowd {
 public:
  explicit SolidCrowd(std::vector<SolidPtr> parts);  // none: everywhere far outside

  // Signed distance of the union: exact within one grid cell of a surface, a lower bound farther outside.
  double signed_distance_mm(const Vec3& mm) const;
  const SolidBounds& bounds() const { return bounds_; }

 private:
  std::size_t cell_of(const Vec3& mm) const;

  std::vector<SolidPtr> parts_;
  SolidBounds bounds_;
  double edge_mm_ = 0;  // of a cubic cell; 0: one cell holds all
  std::array<std::size_t, 3> cells_{1, 1, 1};
  std::vector<std::vector<std::uint32_t>> near_;  // per cell: parts within two edges of it
};

}  // namespace halfmark
