#include "analysis/blur_estimate.h"

#include <Eigen/Cholesky>
#include <Eigen/Core>
#include <algorithm>
#include <cmath>
#include <optional>
#include <type_traits>
#include <vector>

#include "analysis/edge_places.h"

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
using Parameters = Eigen::Matrix<double, 7, 1>;

std::optional<Parameters> fit_edge(const std::vector<Sample>& samples, const EdgeLevels& levels,
                                   double& residual) {
  Parameters p;
  p << levels.air, levels.material, 0, 0, 0, 0, 1.0;
  double damping = 1e-3;
  const auto cost_of = [&](const Parameters& q) {
    double sum = 0;
    for (const Sample& s : samples) {
      const double z = (s.t - q[2] - q[3] * s.u - q[4] * s.v - 0.5 * q[5] * (s.u * s.u + s.v * s.v)) / q[6];
      const double r = s.grey - (q[0] + (q[1] - q[0]) * 0.5 * std::erfc(-z * M_SQRT1_2));
      sum += r * r;
    }
    return sum;
  };
  double cost = cost_of(p);
  for (int iteration = 0; iteration < 12; ++iteration) {
    Eigen::Matrix<double, 7, 7> normal = Eigen::Matrix<double, 7, 7>::Zero();
    Parameters gradient = Parameters::Zero();
    for (const Sample& s : samples) {
      const double q = s.u * s.u + s.v * s.v;
      const double z = (s.t - p[2] - p[3] * s.u - p[4] * s.v - 0.5 * p[5] * q) / p[6];
      const double phi = 0.5 * std::erfc(-z * M_SQRT1_2),
                   density = 0.3989422804014327 * std::exp(-0.5 * z * z);
      const double slope = (p[1] - p[0]) * density / p[6];
      Parameters j;
      j << 1 - phi, phi, -slope, -slope * s.u, -slope * s.v, -0.5 * slope * q, -slope * z;
      const double r = s.grey - (p[0] + (p[1] - p[0]) * phi);
      normal.noalias() += j * j.transpose();
      gradient += r * j;
    }
    bool better = false;
    for (int attempt = 0; attempt < 6 && !better; ++attempt) {
      Eigen::Matrix<double, 7, 7> damped = normal;
      damped.diagonal() *= 1 + damping;
      Parameters next = p + damped.ldlt().solve(gradient);
      next[6] = std::clamp(next[6], 0.2, 5.0);
      const double next_cost = cost_of(next);
      better = next_cost < cost;
      if (better) {
        const bool settled = cost - next_cost < 1e-7 * cost;
        p = next;
        cost = next_cost;
        damping *= 0.2;
        if (settled) iteration = 99;
      } else {
        damping *= 8;
      }
    }
    if (!better) break;
  }
  residual = std::sqrt(cost / static_cast<double>(samples.size() - 7));
  if (!p.allFinite()) return std::nullopt;
  return p;
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
  double residual = 0;
  const auto p = fit_edge(samples, levels, residual);
  const double contrast = levels.material - levels.air;
  if (!p || std::abs((*p)[0] - levels.air) > plateau_slack * contrast ||
      std::abs((*p)[1] - levels.material) > plateau_slack * contrast)
    return std::nullopt;
  if (std::abs((*p)[2]) > 2 || std::abs((*p)[5]) > most_curvature || (*p)[6] > 4) return std::nullopt;
  if (residual > 1.3 * levels.noise + 0.02 * contrast) return std::nullopt;
  double averaging = 0;
  for (std::size_t a = 0; a < 3; ++a) averaging += n[a] * n[a] * scale[a] * scale[a] / 12;
  return (*p)[6] * (*p)[6] - averaging;
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
        if (!field.whole() && !(contains(field.rows, e.x - reach, e.y - reach, e.z) &&
                                contains(field.rows, e.x + reach, e.y + reach, e.z) &&
                                contains(field.rows, e.x - reach, e.y + reach, e.z) &&
                                contains(field.rows, e.x + reach, e.y - reach, e.z))) {
          continue;
        }
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
