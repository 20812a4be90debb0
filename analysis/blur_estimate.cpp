#include "analysis/blur_estimate.h"

#include <algorithm>
#include <cmath>
#include <optional>
#include <type_traits>
#include <vector>

#include "analysis/curve_fit.h"
#include "analysis/edge_places.h"
#include "analysis/normal_distribution.h"

namespace halfmark {

namespace {

constexpr std::size_t most_edges = 900;   // fits tried
constexpr std::size_t enough_edges = 12;  // sound ones needed
constexpr std::int64_t reach = 6;         // voxels looked at around an edge
constexpr double along_mm_voxels = 5.0;   // of these: within this distance along the normal ...
constexpr double beside_voxels = 2.3;     // ... and this distance from it
constexpr double plateau_slack =
    0.2;  // fitted plateaus may differ from the levels by this share of the contrast
constexpr double most_curvature = 0.15;  // 1/voxel

struct Sample {
  double t, u, v, grey;  // along the normal and across it, in voxels
};

// g(t) = low + (high - low) Phi((t - t0 - a u - b v - c (u^2 + v^2) / 2) / s); parameters low, high, t0, a,
// b, c, s.
std::optional<CurveFit<7>> fit_edge(const std::vector<Sample>& samples, const EdgeLevels& levels) {
  Parameters<7> start;
  start << levels.air, levels.material, 0, 0, 0, 0, 1.0;
  const auto z_of = [](const Sample& s, const Parameters<7>& p) {
    return (s.t - p[2] - p[3] * s.u - p[4] * s.v - 0.5 * p[5] * (s.u * s.u + s.v * s.v)) / p[6];
  };
  const auto value = [&](const Sample& s, const Parameters<7>& p) {
    return p[0] + (p[1] - p[0]) * normal_distribution(z_of(s, p));
  };
  const auto linearised = [&](const Sample& s, const Parameters<7>& p) {
    const double q = s.u * s.u + s.v * s.v, z = z_of(s, p), phi = normal_distribution(z);
    const double slope = (p[1] - p[0]) * normal_density(z) / p[6];
    Linearised<7> at{p[0] + (p[1] - p[0]) * phi, {}};
    at.slope << 1 - phi, phi, -slope, -slope * s.u, -slope * s.v, -0.5 * slope * q, -slope * z;
    return at;
  };
  const auto fit = fit_curve<7>(samples, start, value, linearised,
                                [](Parameters<7>& p) { p[6] = std::clamp(p[6], 0.2, 5.0); });
  if (!fit.p.allFinite()) return std::nullopt;
  return fit;
}

template <class View>
std::optional<double> blur_variance_at(const View& view, const Edge& e, const Vec3& scale,
                                       const EdgeLevels& levels, std::vector<Sample>& samples) {
  const Vec3 gradient = local_gradient(view, e, scale, 2);
  if (length(gradient) <= 0) return std::nullopt;
  const auto [n, u, v] = frame_along(gradient);
  samples.clear();
  for (std::int64_t z = -reach; z <= reach; ++z) {
    for (std::int64_t y = -reach; y <= reach; ++y) {
      for (std::int64_t x = -reach; x <= reach; ++x) {
        const Vec3 d{static_cast<double>(x) * scale[0], static_cast<double>(y) * scale[1],
                     static_cast<double>(z) * scale[2]};
        const double t = dot(d, n), du = dot(d, u), dv = dot(d, v);
        if (std::abs(t) > along_mm_voxels || du * du + dv * dv > beside_voxels * beside_voxels) continue;
        samples.push_back({t, du, dv, view(e.x + x, e.y + y, e.z + z)});
      }
    }
  }
  if (samples.size() < 40) return std::nullopt;
  const auto fit = fit_edge(samples, levels);
  if (!fit) return std::nullopt;
  const Parameters<7>& p = fit->p;
  const double contrast = levels.material - levels.air;
  if (std::abs(p[0] - levels.air) > plateau_slack * contrast ||
      std::abs(p[1] - levels.material) > plateau_slack * contrast)
    return std::nullopt;
  if (std::abs(p[2]) > 2 || std::abs(p[5]) > most_curvature || p[6] > 4) return std::nullopt;
  if (fit->residual(samples.size()) > 1.3 * levels.noise + 0.02 * contrast) return std::nullopt;
  double averaging = 0;
  for (std::size_t a = 0; a < 3; ++a) averaging += n[a] * n[a] * scale[a] * scale[a] / 12;
  return p[6] * p[6] - averaging;
}

}  // namespace

BlurEstimate estimate_blur(const VolumeSource& source, const SampleWindows& windows, const FieldOfView& field,
                           const EdgeLevels& levels) {
  const VolumeGeometry& geometry = source.geometry();
  Vec3 scale;
  for (std::size_t a = 0; a < 3; ++a) scale[a] = geometry.spacing_mm[a] / geometry.voxel_mm();
  const double threshold = 0.5 * (levels.air + levels.material);
  std::vector<double> variances;
  visit_voxel_type(source.voxel_type(), [&](auto* type) {
    using T = std::remove_pointer_t<decltype(type)>;
    std::vector<Sample> samples;
    for (const auto& window : windows.windows()) {
      const WindowView<T> view(window, geometry.size);
      std::vector<Edge> edges;
      collect_edges(view, threshold, reach + 1, edges);
      const std::size_t most = std::max<std::size_t>(1, most_edges / windows.windows().size());
      const std::size_t tries = std::min(edges.size(), most);
      for (std::size_t i = 0; i < tries; ++i) {
        const Edge& e = edges[i * edges.size() / tries];
        if (!field.whole() && !cube_in_field(field, e.x, e.y, e.z, reach)) continue;
        if (const auto variance = blur_variance_at(view, e, scale, levels, samples))
          variances.push_back(*variance);
      }
    }
  });
  BlurEstimate out;
  out.edges = static_cast<std::int64_t>(variances.size());
  if (variances.size() < enough_edges) return out;
  std::sort(variances.begin(), variances.end());
  const auto at = [&](double share) {
    return variances[static_cast<std::size_t>(share * static_cast<double>(variances.size() - 1))];
  };
  const double variance = std::max(at(0.5), 0.0025);
  out.sigma_voxel = std::sqrt(variance);
  // Half the interquartile range is 0.674 standard deviations; the median's own is 1.253 / sqrt(n) of it.
  const double scatter =
      (at(0.75) - at(0.25)) / 1.349 * 1.253 / std::sqrt(static_cast<double>(variances.size()));
  out.standard_uncertainty = std::hypot(0.5 * scatter / out.sigma_voxel, 0.01 * out.sigma_voxel);
  return out;
}

}  // namespace halfmark
