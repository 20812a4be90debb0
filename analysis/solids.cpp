#include "analysis/solids.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>
#include <utility>

#include "analysis/solid_crowd.h"

namespace halfmark {

namespace {

SolidBounds around(const Vec3& centre, const Vec3& half) { return {centre - half, centre + half}; }

SolidBounds joined(const SolidBounds& a, const SolidBounds& b) {
  SolidBounds out;
  for (std::size_t i = 0; i < 3; ++i) {
    out.min_mm[i] = std::min(a.min_mm[i], b.min_mm[i]);
    out.max_mm[i] = std::max(a.max_mm[i], b.max_mm[i]);
  }
  return out;
}

class Sphere : public Solid {
 public:
  Sphere(const Vec3& centre, double radius) : centre_(centre), radius_(radius) {}
  double signed_distance_mm(const Vec3& p) const override { return length(p - centre_) - radius_; }
  SolidBounds bounds() const override { return around(centre_, {radius_, radius_, radius_}); }

 private:
  Vec3 centre_;
  double radius_;
};

class Box : public Solid {
 public:
  Box(const Vec3& min, const Vec3& max) : centre_(0.5 * (min + max)), half_(0.5 * (max - min)) {}
  double signed_distance_mm(const Vec3& p) const override {
    Vec3 q;
    for (std::size_t a = 0; a < 3; ++a) q[a] = std::abs(p[a] - centre_[a]) - half_[a];
    const double outside = length({std::max(q[0], 0.0), std::max(q[1], 0.0), std::max(q[2], 0.0)});
    return outside + std::min(0.0, std::max({q[0], q[1], q[2]}));
  }
  SolidBounds bounds() const override { return around(centre_, half_); }

 private:
  Vec3 centre_, half_;
};

// Position along an axis and distance from it.
struct Axis {
  Axis(const Vec3& from_, const Vec3& to)
      : from(from_), span(length(to - from_)), along((1 / std::max(span, 1e-300)) * (to - from_)) {}
  std::pair<double, double> of(const Vec3& p) const {
    const Vec3 d = p - from;
    const double t = dot(d, along);
    return {t, std::sqrt(std::max(0.0, dot(d, d) - t * t))};
  }
  Vec3 from;
  double span;
  Vec3 along;
};

SolidBounds bounds_of(const Axis& axis, double radius) {
  const Vec3 to = axis.from + axis.span * axis.along, r{radius, radius, radius};
  return joined(around(axis.from, r), around(to, r));
}

class Cylinder : public Solid {
 public:
  Cylinder(const Vec3& from, const Vec3& to, double radius) : axis_(from, to), radius_(radius) {}
  double signed_distance_mm(const Vec3& p) const override {
    const auto [t, r] = axis_.of(p);
    const double beside = r - radius_, beyond = std::max(-t, t - axis_.span);
    return std::min(0.0, std::max(beside, beyond)) + std::hypot(std::max(beside, 0.0), std::max(beyond, 0.0));
  }
  SolidBounds bounds() const override { return bounds_of(axis_, radius_); }

 private:
  Axis axis_;
  double radius_;
};

class Capsule : public Solid {
 public:
  Capsule(const Vec3& from, const Vec3& to, double radius) : axis_(from, to), radius_(radius) {}
  double signed_distance_mm(const Vec3& p) const override {
    const double t = std::clamp(dot(p - axis_.from, axis_.along), 0.0, axis_.span);
    return length(p - (axis_.from + t * axis_.along)) - radius_;
  }
  SolidBounds bounds() const override { return bounds_of(axis_, radius_); }

 private:
  Axis axis_;
  double radius_;
};

// The nearest point on an ellipsoid by Newton's method on the Lagrange multiplier (Eberly, "Distance from a
// point to an ellipse, an ellipsoid, or a hyperellipsoid", 2013).
class Ellipsoid : public Solid {
 public:
  Ellipsoid(const Vec3& centre, const Vec3& semi_axes) : centre_(centre), e_(semi_axes) {}
  double signed_distance_mm(const Vec3& p) const override {
    Vec3 y;
    for (std::size_t a = 0; a < 3; ++a) y[a] = std::abs(p[a] - centre_[a]);
    const double k = value(y, 0);
    if (length(y) < 1e-12) return -*std::min_element(e_.begin(), e_.end());
    const double least = *std::min_element(e_.begin(), e_.end());
    double low = -least * least, high = std::sqrt(e_[0] * e_[0] * y[0] * y[0] + e_[1] * e_[1] * y[1] * y[1] +
                                                  e_[2] * e_[2] * y[2] * y[2]);
    for (int i = 0; i < 80 && high - low > 1e-13 * (1 + std::abs(high)); ++i) {
      const double middle = 0.5 * (low + high);
      (value(y, middle) > 0 ? low : high) = middle;
    }
    const double t = 0.5 * (low + high);
    Vec3 x;
    for (std::size_t a = 0; a < 3; ++a) x[a] = e_[a] * e_[a] * y[a] / std::max(t + e_[a] * e_[a], 1e-300);
    const double d = length(x - y);
    return k > 0 ? d : -d;
  }
  SolidBounds bounds() const override { return around(centre_, e_); }

 private:
  double value(const Vec3& y, double t) const {
    double sum = -1;
    for (std::size_t a = 0; a < 3; ++a) {
      const double f = e_[a] * y[a] / std::max(t + e_[a] * e_[a], 1e-300);
      sum += f * f;
    }
    return sum;
  }
  Vec3 centre_, e_;
};

class Torus : public Solid {
 public:
  Torus(const Vec3& centre, const Vec3& axis, double ring, double tube)
      : axis_(centre, centre + axis), ring_(ring), tube_(tube) {}
  double signed_distance_mm(const Vec3& p) const override {
    const auto [t, r] = axis_.of(p);
    return std::hypot(r - ring_, t) - tube_;
  }
  SolidBounds bounds() const override {
    const double r = ring_ + tube_;
    return around(axis_.from, {r, r, r});
  }

 private:
  Axis axis_;
  double ring_, tube_;
};

class United : public Solid {
 public:
  explicit United(std::vector<SolidPtr> parts) : crowd_(std::move(parts)) {}
  double signed_distance_mm(const Vec3& p) const override { return crowd_.signed_distance_mm(p); }
  SolidBounds bounds() const override { return crowd_.bounds(); }

 private:
  SolidCrowd crowd_;
};

class Subtracted : public Solid {
 public:
  Subtracted(SolidPtr body, std::vector<SolidPtr> removed)
      : body_(std::move(body)), removed_(std::move(removed)) {}
  double signed_distance_mm(const Vec3& p) const override {
    return std::max(body_->signed_distance_mm(p), -removed_.signed_distance_mm(p));
  }
  SolidBounds bounds() const override { return body_->bounds(); }

 private:
  SolidPtr body_;
  SolidCrowd removed_;
};

class Intersected : public Solid {
 public:
  explicit Intersected(std::vector<SolidPtr> parts) : parts_(std::move(parts)) {}
  double signed_distance_mm(const Vec3& p) const override {
    double most = -1e300;
    for (const auto& part : parts_) most = std::max(most, part->signed_distance_mm(p));
    return most;
  }
  SolidBounds bounds() const override {
    SolidBounds out = parts_.at(0)->bounds();
    for (const auto& part : parts_) {
      const SolidBounds b = part->bounds();
      for (std::size_t a = 0; a < 3; ++a) {
        out.min_mm[a] = std::max(out.min_mm[a], b.min_mm[a]);
        out.max_mm[a] = std::max(out.min_mm[a], std::min(out.max_mm[a], b.max_mm[a]));
      }
    }
    return out;
  }

 private:
  std::vector<SolidPtr> parts_;
};

class Moved : public Solid {
 public:
  Moved(SolidPtr body, const std::array<double, 9>& rotation, const Vec3& centre, const Vec3& shift)
      : body_(std::move(body)), r_(rotation), centre_(centre), shift_(shift) {}
  double signed_distance_mm(const Vec3& p) const override {
    const Vec3 q = p - centre_ - shift_;
    // The inverse of a rotation is its transpose.
    return body_->signed_distance_mm(centre_ + Vec3{r_[0] * q[0] + r_[3] * q[1] + r_[6] * q[2],
                                                    r_[1] * q[0] + r_[4] * q[1] + r_[7] * q[2],
                                                    r_[2] * q[0] + r_[5] * q[1] + r_[8] * q[2]});
  }
  SolidBounds bounds() const override {
    const SolidBounds b = body_->bounds();
    SolidBounds out{{1e300, 1e300, 1e300}, {-1e300, -1e300, -1e300}};
    for (std::size_t corner = 0; corner < 8; ++corner) {
      Vec3 c;
      for (std::size_t a = 0; a < 3; ++a) c[a] = ((corner >> a) & 1) != 0 ? b.max_mm[a] : b.min_mm[a];
      const Vec3 q = c - centre_;
      const Vec3 moved{r_[0] * q[0] + r_[1] * q[1] + r_[2] * q[2], r_[3] * q[0] + r_[4] * q[1] + r_[5] * q[2],
                       r_[6] * q[0] + r_[7] * q[1] + r_[8] * q[2]};
      out = joined(out, around(centre_ + shift_ + moved, {0, 0, 0}));
    }
    return out;
  }

 private:
  SolidPtr body_;
  std::array<double, 9> r_;
  Vec3 centre_, shift_;
};

}  // namespace

SolidPtr sphere(const Vec3& centre_mm, double radius_mm) {
  return std::make_shared<Sphere>(centre_mm, radius_mm);
}
SolidPtr box(const Vec3& min_mm, const Vec3& max_mm) { return std::make_shared<Box>(min_mm, max_mm); }
SolidPtr cylinder(const Vec3& from_mm, const Vec3& to_mm, double radius_mm) {
  return std::make_shared<Cylinder>(from_mm, to_mm, radius_mm);
}
SolidPtr capsule(const Vec3& from_mm, const Vec3& to_mm, double radius_mm) {
  return std::make_shared<Capsule>(from_mm, to_mm, radius_mm);
}
SolidPtr ellipsoid(const Vec3& centre_mm, const Vec3& semi_axes_mm) {
  return std::make_shared<Ellipsoid>(centre_mm, semi_axes_mm);
}
SolidPtr torus(const Vec3& centre_mm, const Vec3& axis, double ring_radius_mm, double tube_radius_mm) {
  return std::make_shared<Torus>(centre_mm, axis, ring_radius_mm, tube_radius_mm);
}
SolidPtr united(std::vector<SolidPtr> parts) { return std::make_shared<United>(std::move(parts)); }
SolidPtr subtracted(SolidPtr body, std::vector<SolidPtr> removed) {
  return std::make_shared<Subtracted>(std::move(body), std::move(removed));
}
SolidPtr intersected(std::vector<SolidPtr> parts) { return std::make_shared<Intersected>(std::move(parts)); }
SolidPtr moved(SolidPtr body, const std::array<double, 9>& rotation, const Vec3& centre_mm,
               const Vec3& shift_mm) {
  return std::make_shared<Moved>(std::move(body), rotation, centre_mm, shift_mm);
}

// Rodrigues' formula.
std::array<double, 9> rotation_about(const Vec3& axis, double angle_degrees) {
  const Vec3 u = (1 / length(axis)) * axis;
  const double a = angle_degrees * std::numbers::pi / 180, c = std::cos(a), s = std::sin(a), k = 1 - c;
  return {c + u[0] * u[0] * k,        u[0] * u[1] * k - u[2] * s, u[0] * u[2] * k + u[1] * s,
          u[1] * u[0] * k + u[2] * s, c + u[1] * u[1] * k,        u[1] * u[2] * k - u[0] * s,
          u[2] * u[0] * k - u[1] * s, u[2] * u[1] * k + u[0] * s, c + u[2] * u[2] * k};
}

}  // namespace halfmark
