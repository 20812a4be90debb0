#include "analysis/thin_wall_level.h"

#include <Eigen/Cholesky>
#include <Eigen/Core>
#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>
#include <optional>
#include <type_traits>
#include <utility>
#include <vector>

#include "analysis/edge_places.h"

namespace halfmark {

namespace {

constexpr std::size_t most_places = 500;
constexpr std::size_t enough_walls = 20;
// Walls looked for; thicker ones have a plateau that other estimates find.
constexpr double thickest_voxels = 13;
constexpr double beside_voxels = 2.3, beyond_voxels = 4.5, clear_of_rim_voxels = 3;
constexpr std::int64_t reach = 16;  // thickest wall and what lies beyond, from a place inside the near face
// A level that its own fit leaves this uncertain says nothing.
constexpr double worst_level_share = 0.05;
// Thinner than this many edge widths, thickness and level cannot be told apart.
constexpr double least_widths = 3.5;
// Walls of printed parts are never quite plane and parallel: what that leaves of the level, from phantoms.
constexpr double model_share = 0.004;
// Below this many edge widths the two lean on each other: this much of the contrast more a width (from
// phantoms).
constexpr double easy_widths = 4.5, share_per_width = 0.02;

struct Sample {
  double t, u, v, grey;
};

// level, place of the near face, its tilt along u and v, edge width, thickness.
using Parameters = Eigen::Matrix<double, 6, 1>;
using Matrix = Eigen::Matrix<double, 6, 6>;

struct Modelled {
  double value;
  Parameters slope;
};

double step_of(double z) { return 0.5 * std::erfc(-z * std::numbers::sqrt2 / 2); }
double bell_of(double z) { return std::exp(-0.5 * z * z) / std::sqrt(2 * std::numbers::pi); }

Modelled model_at(const Sample& s, const Parameters& p, double air) {
  const double near = (s.t - p[1] - p[2] * s.u - p[3] * s.v) / p[4], far = near - p[5] / p[4];
  const double share = step_of(near) - step_of(far), bell_near = bell_of(near), bell_far = bell_of(far);
  const double height = p[0] - air, along = -height * (bell_near - bell_far) / p[4];
  Modelled out{air + height * share, {}};
  out.slope << share, along, along * s.u, along * s.v, -height * (bell_near * near - bell_far * far) / p[4],
      height * bell_far / p[4];
  return out;
}

struct WallFit {
  Parameters p;
  double residual = 0, level_uncertainty = 0;
};

std::optional<WallFit> fit_wall(const std::vector<Sample>& samples, const EdgeLevels& levels,
                                double thickness) {
  Parameters p;
  p << levels.material, 0, 0, 0, 1.0, thickness;
  const auto cost_of = [&](const Parameters& q) {
    double sum = 0;
    for (const Sample& s : samples) {
      const double r = s.grey - model_at(s, q, levels.air).value;
      sum += r * r;
    }
    return sum;
  };
  double cost = cost_of(p), damping = 1e-3;
  Matrix normal;
  for (int iteration = 0; iteration < 25; ++iteration) {
    normal.setZero();
    Parameters gradient = Parameters::Zero();
    for (const Sample& s : samples) {
      const Modelled m = model_at(s, p, levels.air);
      normal.noalias() += m.slope * m.slope.transpose();
      gradient += (s.grey - m.value) * m.slope;
    }
    bool better = false, settled = false;
    for (int attempt = 0; attempt < 6 && !better; ++attempt) {
      Matrix damped = normal;
      damped.diagonal() *= 1 + damping;
      Parameters next = p + damped.ldlt().solve(gradient);
      next[4] = std::clamp(next[4], 0.25, 5.0);
      next[5] = std::clamp(next[5], 0.5, thickest_voxels + 2);
      const double next_cost = cost_of(next);
      better = next_cost < cost;
      if (better) {
        settled = cost - next_cost < 1e-8 * cost;
        p = next;
        cost = next_cost;
        damping *= 0.2;
      } else {
        damping *= 8;
      }
    }
    if (!better || settled) break;
  }
  if (!p.allFinite()) return std::nullopt;
  WallFit out{p, std::sqrt(cost / static_cast<double>(samples.size() - 6)), 0};
  const Matrix covariance = normal.ldlt().solve(Matrix::Identity());
  out.level_uncertainty = out.residual * std::sqrt(std::max(covariance(0, 0), 0.0));
  return out;
}

template <class View>
class WallSampler {
 public:
  WallSampler(const View& view, const FieldOfView& field, const Vec3& scale, const EdgeLevels& levels)
      : view_(view), field_(field), scale_(scale), levels_(levels) {}

  // Distance along the normal from the place to the far face; none within the thickest wall.
  std::optional<double> thickness_at(const Edge& e, const LocalFrame& frame) const {
    const double threshold = 0.5 * (levels_.air + levels_.material);
    for (double t = 1.5; t < thickest_voxels; t += 0.5) {
      if (mean_at(e, frame, t) < threshold && mean_at(e, frame, t + 1) < threshold) return t;
    }
    return std::nullopt;
  }

  // The wall goes on around the place: no rim within reach of the blur.
  bool is_wide(const Edge& e, const LocalFrame& frame, double thickness) const {
    const double threshold = 0.5 * (levels_.air + levels_.material),
                 far = beside_voxels + clear_of_rim_voxels;
    for (const auto& [u, v] : {std::pair{far, 0.0}, {-far, 0.0}, {0.0, far}, {0.0, -far}}) {
      if (mean_at(e, frame, 0.5 * thickness, u, v) < threshold) return false;
    }
    return true;
  }

  void collect(const Edge& e, const LocalFrame& frame, double thickness, std::vector<Sample>& samples) const {
    samples.clear();
    std::array<std::int64_t, 3> low, high;  // box of the cylinder
    for (std::size_t a = 0; a < 3; ++a) {
      const double first = -beyond_voxels * frame.n[a], last = (thickness + beyond_voxels) * frame.n[a];
      const double side = beside_voxels * std::sqrt(std::max(0.0, 1 - frame.n[a] * frame.n[a]));
      low[a] = static_cast<std::int64_t>(std::floor((std::min(first, last) - side) / scale_[a]));
      high[a] = static_cast<std::int64_t>(std::ceil((std::max(first, last) + side) / scale_[a]));
      low[a] = std::max(low[a], -reach);
      high[a] = std::min(high[a], reach);
    }
    for (std::int64_t z = low[2]; z <= high[2]; ++z) {
      for (std::int64_t y = low[1]; y <= high[1]; ++y) {
        for (std::int64_t x = low[0]; x <= high[0]; ++x) {
          const Vec3 d{static_cast<double>(x) * scale_[0], static_cast<double>(y) * scale_[1],
                       static_cast<double>(z) * scale_[2]};
          const double t = dot(d, frame.n), u = dot(d, frame.u), v = dot(d, frame.v);
          if (t < -beyond_voxels || t > thickness + beyond_voxels ||
              u * u + v * v > beside_voxels * beside_voxels)
            continue;
          if (holds(e.x + x, e.y + y, e.z + z))
            samples.push_back({t, u, v, view_(e.x + x, e.y + y, e.z + z)});
        }
      }
    }
  }

 private:
  bool holds(std::int64_t x, std::int64_t y, std::int64_t z) const {
    return view_.holds(x, y, z, 0) && (field_.whole() || contains(field_.rows, x, y, z));
  }

  // Mean of the voxels next to the point (t, u0, v0) and four points one voxel beside it.
  double mean_at(const Edge& e, const LocalFrame& frame, double t, double u0 = 0, double v0 = 0) const {
    double sum = 0;
    for (const auto& [u, v] : {std::pair{0.0, 0.0}, {1.0, 0.0}, {-1.0, 0.0}, {0.0, 1.0}, {0.0, -1.0}}) {
      const Vec3 d = t * frame.n + (u0 + u) * frame.u + (v0 + v) * frame.v;
      const std::int64_t x = e.x + std::lround(d[0] / scale_[0]), y = e.y + std::lround(d[1] / scale_[1]),
                         z = e.z + std::lround(d[2] / scale_[2]);
      sum += holds(x, y, z) ? view_(x, y, z) : levels_.material;  // no face is seen beyond the field
    }
    return sum / 5;
  }

  const View& view_;
  const FieldOfView& field_;
  Vec3 scale_;
  EdgeLevels levels_;
};

bool is_sound(const WallFit& fit, const EdgeLevels& levels) {
  const double contrast = levels.material - levels.air;
  return fit.p[5] > least_widths * fit.p[4] && fit.level_uncertainty < worst_level_share * contrast &&
         std::abs(fit.p[1]) < 2 && fit.residual < 1.3 * levels.noise + 0.02 * contrast &&
         fit.p[0] > levels.air + 0.6 * contrast && fit.p[0] < levels.air + 2 * contrast;
}

double quantile(std::vector<double> values, double share) {
  const auto at =
      values.begin() + static_cast<std::ptrdiff_t>(share * static_cast<double>(values.size() - 1));
  std::nth_element(values.begin(), at, values.end());
  return *at;
}

// The median's standard uncertainty from half the interquartile range.
double median_uncertainty(const std::vector<double>& values) {
  return (quantile(values, 0.75) - quantile(values, 0.25)) / 1.349 * 1.253 /
         std::sqrt(static_cast<double>(values.size()));
}

}  // namespace

ThinWallLevel estimate_thin_walls(const VolumeSource& source, const SampleWindows& windows,
                                  const FieldOfView& field, const EdgeLevels& levels) {
  const VolumeGeometry& geometry = source.geometry();
  Vec3 scale;
  for (std::size_t a = 0; a < 3; ++a) scale[a] = geometry.spacing_mm[a] / geometry.voxel_mm();
  // The first level is low, and the threshold with it: an edge is found all the same.
  const double threshold = 0.5 * (levels.air + levels.material);
  std::vector<double> heights, variances, widths;
  visit_voxel_type(source.voxel_type(), [&](auto* type) {
    using T = std::remove_pointer_t<decltype(type)>;
    std::vector<Sample> samples;
    for (const auto& window : windows.windows()) {
      const WindowView<T> view(window, geometry.size);
      const WallSampler sampler(view, field, scale, levels);
      std::vector<Edge> edges;
      collect_edges(view, threshold, 3, edges);
      const std::size_t tries =
          std::min(edges.size(), std::max<std::size_t>(1, most_places / windows.windows().size()));
      for (std::size_t i = 0; i < tries; ++i) {
        const Edge& e = edges[i * edges.size() / tries];
        const Vec3 gradient = local_gradient(view, e, scale, 2);
        if (length(gradient) <= 0) continue;
        const LocalFrame frame = frame_along(gradient);
        const auto thickness = sampler.thickness_at(e, frame);
        if (!thickness || !sampler.is_wide(e, frame, *thickness)) continue;
        sampler.collect(e, frame, *thickness, samples);
        if (samples.size() < 60) continue;
        const auto fit = fit_wall(samples, levels, *thickness);
        if (!fit || !is_sound(*fit, levels)) continue;
        double averaging = 0;
        for (std::size_t a = 0; a < 3; ++a) averaging += frame.n[a] * frame.n[a] * scale[a] * scale[a] / 12;
        heights.push_back(fit->p[0]);
        widths.push_back(fit->p[5] / fit->p[4]);
        variances.push_back(fit->p[4] * fit->p[4] - averaging);
      }
    }
  });
  ThinWallLevel out;
  if (heights.size() < enough_walls) return out;
  out.walls = static_cast<std::int64_t>(heights.size());
  out.material = quantile(heights, 0.5);
  out.standard_uncertainty =
      std::hypot(median_uncertainty(heights),
                 (model_share + share_per_width * std::max(0.0, easy_widths - quantile(widths, 0.5))) *
                     (out.material - levels.air));
  out.sigma_voxel = std::sqrt(std::max(quantile(variances, 0.5), 0.0025));
  out.sigma_standard_uncertainty =
      std::hypot(0.5 * median_uncertainty(variances) / out.sigma_voxel, 0.02 * out.sigma_voxel);
  return out;
}

}  // namespace halfmark
