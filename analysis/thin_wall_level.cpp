#include "analysis/thin_wall_level.h"

#include <algorithm>
#include <array>
#include <cmath>
#include <optional>
#include <type_traits>
#include <utility>
#include <vector>

#include "analysis/curve_fit.h"
#include "analysis/edge_places.h"
#include "analysis/normal_distribution.h"
#include "analysis/quantiles.h"

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

// Parameters: level, place of the near face, its tilt along u and v, edge width, thickness.
Linearised<6> model_at(const Sample& s, const Parameters<6>& p, double air) {
  const double near = (s.t - p[1] - p[2] * s.u - p[3] * s.v) / p[4], far = near - p[5] / p[4];
  const double share = normal_distribution(near) - normal_distribution(far), bell_near = normal_density(near),
               bell_far = normal_density(far);
  const double height = p[0] - air, along = -height * (bell_near - bell_far) / p[4];
  Linearised<6> out{air + height * share, {}};
  out.slope << share, along, along * s.u, along * s.v, -height * (bell_near * near - bell_far * far) / p[4],
      height * bell_far / p[4];
  return out;
}

struct WallFit {
  Parameters<6> p;
  double residual = 0, level_uncertainty = 0;
};

std::optional<WallFit> fit_wall(const std::vector<Sample>& samples, const EdgeLevels& levels,
                                double thickness) {
  Parameters<6> start;
  start << levels.material, 0, 0, 0, 1.0, thickness;
  const auto fit = fit_curve<6>(
      samples, start,
      [&](const Sample& s, const Parameters<6>& p) { return model_at(s, p, levels.air).value; },
      [&](const Sample& s, const Parameters<6>& p) { return model_at(s, p, levels.air); },
      [](Parameters<6>& p) {
        p[4] = std::clamp(p[4], 0.25, 5.0);
        p[5] = std::clamp(p[5], 0.5, thickest_voxels + 2);
      },
      {25, 1e-8});
  if (!fit.p.allFinite()) return std::nullopt;
  WallFit out{fit.p, fit.residual(samples.size()), 0};
  const Eigen::Matrix<double, 6, 6> covariance =
      fit.normal.ldlt().solve(Eigen::Matrix<double, 6, 6>::Identity());
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

// The median's standard uncertainty from half the interquartile range.
double median_uncertainty(std::vector<double>& values) {
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
