// Solids by signed distance: bodies of known shape for demo volumes and for tests.
#pragma once

#include <memory>
#include <vector>

#include "io/vec3.h"

namespace halfmark {

struct SolidBounds {
  Vec3 min_mm{}, max_mm{};
};

class Solid {
 public:
  virtual ~Solid() = default;
  // Signed distance to the surface in mm, negative inside; exact near the surface for primitives, never
  // larger than the true distance in magnitude for unions and differences.
  virtual double signed_distance_mm(const Vec3& mm) const = 0;
  virtual SolidBounds bounds() const = 0;
};
using SolidPtr = std::shared_ptr<const Solid>;

SolidPtr sphere(const Vec3& centre_mm, double radius_mm);
SolidPtr box(const Vec3& min_mm, const Vec3& max_mm);
SolidPtr cylinder(const Vec3& from_mm, const Vec3& to_mm, double radius_mm);  // flat ends
SolidPtr capsule(const Vec3& from_mm, const Vec3& to_mm, double radius_mm);   // round ends
SolidPtr ellipsoid(const Vec3& centre_mm, const Vec3& semi_axes_mm);
SolidPtr torus(const Vec3& centre_mm, const Vec3& axis, double ring_radius_mm, double tube_radius_mm);
SolidPtr united(std::vector<SolidPtr> parts);
SolidPtr subtracted(SolidPtr body, std::vector<SolidPtr> removed);
SolidPtr intersected(std::vector<SolidPtr> parts);
// Turned about `centre_mm` by the rotation matrix (row-major) and then moved by shift_mm.
SolidPtr moved(SolidPtr body, const std::array<double, 9>& rotation, const Vec3& centre_mm,
               const Vec3& shift_mm);
// Rotation by angle_degrees about an axis, row-major.
std::array<double, 9> rotation_about(const Vec3& axis, double angle_degrees);

}  // namespace halfmark
