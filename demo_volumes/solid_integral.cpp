#include "demo_volumes/solid_integral.h"

#include <algorithm>
#include <cmath>

#include "analysis/coverage.h"

namespace halfmark {

namespace {

struct Moments {
  double volume = 0;
  Vec3 first{};
  void add(double share, const Vec3& centre, double edge) {
    const double v = share * edge * edge * edge;
    volume += v;
    first = first + v * centre;
  }
};

void integrate_cell(const Solid& solid, const Vec3& centre, double edge, double leaf, Moments& moments) {
  const double d = solid.signed_distance_mm(centre);
  if (std::abs(d) >= 0.5 * std::sqrt(3.0) * edge) {
    if (d < 0) moments.add(1, centre, edge);
    return;
  }
  if (edge <= leaf) {
    moments.add(cell_coverage(solid, centre, {Vec3{edge, 0, 0}, Vec3{0, edge, 0}, Vec3{0, 0, edge}}), centre,
                edge);
    return;
  }
  for (int corner = 0; corner < 8; ++corner) {
    Vec3 p = centre;
    for (std::size_t a = 0; a < 3; ++a) p[a] += ((corner >> a) & 1) != 0 ? 0.25 * edge : -0.25 * edge;
    integrate_cell(solid, p, 0.5 * edge, leaf, moments);
  }
}

}  // namespace

SolidIntegral integrate(const Solid& solid, double leaf_mm) {
  const SolidBounds bounds = solid.bounds();
  const Vec3 size = bounds.max_mm - bounds.min_mm;
  const double edge = std::max({size[0], size[1], size[2]});
  Moments moments;
  integrate_cell(solid, 0.5 * (bounds.min_mm + bounds.max_mm), edge, leaf_mm, moments);
  SolidIntegral out{moments.volume, {}};
  if (out.volume_mm3 > 0) out.centre_mm = (1 / out.volume_mm3) * moments.first;
  return out;
}

}  // namespace halfmark
