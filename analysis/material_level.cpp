// How the level is fitted
//
// Means of blocks of 8 voxels cubed that lie, with three edge widths around them, inside the part are fitted
// by a polynomial in position of degree 0, 2 or 4 (the least by the Bayesian information criterion, Schwarz
// 1978), robustly (Tukey's biweight on the blocks' own scatter): blocks with pores in them are low outliers
// and drop out. Cupping is smooth over the part and is followed; micro-shrinkage, lower than its surroundings
// over a region, is not.
#include "analysis/material_level.h"

#include <tbb/parallel_for.h>

#include <Eigen/Cholesky>
#include <Eigen/Core>
#include <algorithm>
#include <array>
#include <cmath>
#include <type_traits>

#include "analysis/voxel_rows.h"
#include "analysis/wide_registers.h"

namespace halfmark {

namespace {

constexpr std::int64_t block_edge = 8;
constexpr std::size_t most_blocks = 16000;
// With fewer blocks than this per coefficient a polynomial would follow the noise.
constexpr std::size_t blocks_per_term = 12;
constexpr double clear_widths = 3;
// Tukey's constant for 95 % efficiency at the normal distribution.
constexpr double biweight = 4.685;
constexpr int top_degree = 4;

struct Term {
  int x, y, z;
};

std::vector<Term> terms_of(int degree) {
  std::vector<Term> out;
  for (int sum = 0; sum <= degree; ++sum) {
    for (int z = 0; z <= sum; ++z) {
      for (int y = 0; y + z <= sum; ++y) out.push_back({sum - y - z, y, z});
    }
  }
  return out;
}

struct BlockMean {
  Vec3 centre;  // index
  double mean;
};

std::array<double, top_degree + 1> powers(double v) {
  std::array<double, top_degree + 1> out{1};
  for (int i = 1; i <= top_degree; ++i)
    out[static_cast<std::size_t>(i)] = out[static_cast<std::size_t>(i - 1)] * v;
  return out;
}

}  // namespace

struct MaterialLevel::Model {
  double constant = 0;
  std::vector<Term> terms;
  std::vector<double> coefficients;
  Vec3 middle{}, scale{1, 1, 1};  // normalised = (index - middle) * scale

  // Coefficients of the powers of y and x in one plane.
  std::array<std::array<double, top_degree + 1>, top_degree + 1> in_plane(double z) const {
    std::array<std::array<double, top_degree + 1>, top_degree + 1> out{};
    const auto pz = powers((z - middle[2]) * scale[2]);
    for (std::size_t i = 0; i < terms.size(); ++i)
      out[static_cast<std::size_t>(terms[i].y)][static_cast<std::size_t>(terms[i].x)] +=
          coefficients[i] * pz[static_cast<std::size_t>(terms[i].z)];
    return out;
  }
  // Coefficients of the powers of x along one row of it.
  std::array<double, top_degree + 1> along_row(
      const std::array<std::array<double, top_degree + 1>, top_degree + 1>& plane, double y) const {
    std::array<double, top_degree + 1> out{};
    const auto py = powers((y - middle[1]) * scale[1]);
    for (std::size_t j = 0; j < py.size(); ++j) {
      for (std::size_t i = 0; i < out.size(); ++i) out[i] += py[j] * plane[j][i];
    }
    return out;
  }
};

namespace {

// out[i] = polynomial of degree 4 at start + i * step.
HALFMARK_FOR_WIDE_REGISTERS
void polynomial_row(const float* f, float start, float step, std::int64_t count, float* out) {
  const float a = f[0], b = f[1], c = f[2], d = f[3], e = f[4];
  for (std::int32_t i = 0; i < static_cast<std::int32_t>(count); ++i) {
    const float x = start + static_cast<float>(i) * step;
    out[i] = a + x * (b + x * (c + x * (d + x * e)));
  }
}

}  // namespace

MaterialLevel MaterialLevel::constant(double grey) {
  MaterialLevel out;
  auto m = std::make_shared<Model>();
  m->constant = grey;
  out.model = m;
  return out;
}

MaterialLevel::Plane MaterialLevel::plane(std::int64_t z) const {
  Plane out;
  out.model_ = model.get();
  if (!model->terms.empty()) out.terms_ = model->in_plane(static_cast<double>(z));
  return out;
}

void MaterialLevel::Plane::row(std::int64_t y, std::int64_t x_begin, std::int64_t x_end, float* out) const {
  if (model_->terms.empty()) {
    std::fill(out, out + (x_end - x_begin), static_cast<float>(model_->constant));
    return;
  }
  const auto c = model_->along_row(terms_, static_cast<double>(y));
  std::array<float, top_degree + 1> f{};
  for (std::size_t i = 0; i < f.size(); ++i) f[i] = static_cast<float>(c[i]);
  const auto start =
      static_cast<float>((static_cast<double>(x_begin) - model_->middle[0]) * model_->scale[0]);
  polynomial_row(f.data(), start, static_cast<float>(model_->scale[0]), x_end - x_begin, out);
}

void MaterialLevel::row(std::int64_t y, std::int64_t z, std::int64_t x_begin, std::int64_t x_end,
                        float* out) const {
  plane(z).row(y, x_begin, x_end, out);
}

double MaterialLevel::at(double x, double y, double z) const {
  if (model->terms.empty()) return model->constant;
  const auto c = model->along_row(model->in_plane(z), y);
  const double v = (x - model->middle[0]) * model->scale[0];
  return c[0] + v * (c[1] + v * (c[2] + v * (c[3] + v * c[4])));
}

namespace {

// True if every voxel of the box lies in the mask.
bool covered(const RunMask& mask, const std::array<std::int64_t, 3>& begin,
             const std::array<std::int64_t, 3>& end) {
  for (std::int64_t z = begin[2]; z < end[2]; ++z) {
    for (std::int64_t y = begin[1]; y < end[1]; ++y) {
      const auto row = mask.row(y, z);
      const auto run = std::upper_bound(row.begin(), row.end(), begin[0],
                                        [](std::int64_t x, const Run& r) { return x < r.end; });
      if (run == row.end() || run->begin > begin[0] || run->end < end[0]) return false;
    }
  }
  return true;
}

// Means of the clear blocks on a grid, at most about most_blocks of them.
std::vector<BlockMean> clear_blocks(const VolumeSource& source, const PartMap& part, std::int64_t margin,
                                    const RunControl& control) {
  const auto& size = source.geometry().size;
  const double voxels = static_cast<double>(std::max<std::int64_t>(part.inside.voxel_count(), 1));
  const double wanted = voxels / (block_edge * block_edge * block_edge) / static_cast<double>(most_blocks);
  const std::int64_t step =
      block_edge *
      std::max<std::int64_t>(1, static_cast<std::int64_t>(std::cbrt(std::max(wanted, 1.0)) + 0.5));
  const std::int64_t layers = (size[2] + step - 1) / step;
  std::vector<std::vector<BlockMean>> found(static_cast<std::size_t>(layers));
  tbb::parallel_for(std::int64_t{0}, layers, [&](std::int64_t layer) {
    if (control.cancelled()) return;
    const std::int64_t z0 = layer * step, z1 = z0 + block_edge;
    if (z1 > size[2]) return;
    std::vector<std::array<std::int64_t, 3>> places;
    for (std::int64_t y0 = 0; y0 + block_edge <= size[1]; y0 += step) {
      for (std::int64_t x0 = 0; x0 + block_edge <= size[0]; x0 += step) {
        const auto low = [&](std::int64_t v) { return std::max<std::int64_t>(0, v - margin); };
        const auto high = [&](std::int64_t v, std::size_t a) {
          return std::min(size[a], v + block_edge + margin);
        };
        if (covered(part.inside, {low(x0), low(y0), low(z0)}, {high(x0, 0), high(y0, 1), high(z0, 2)}))
          places.push_back({x0, y0, z0});
      }
    }
    if (places.empty()) return;
    visit_voxel_type(source.voxel_type(), [&](auto* type) {
      using T = std::remove_pointer_t<decltype(type)>;
      SlabReader reader(source);
      const T* voxels_of = reader.planes<T>(z0, z1);
      for (const auto& p : places) {
        double sum = 0;
        for (std::int64_t z = 0; z < block_edge; ++z) {
          for (std::int64_t y = 0; y < block_edge; ++y) {
            const T* row = voxels_of + (z * size[1] + p[1] + y) * size[0] + p[0];
            for (std::int64_t x = 0; x < block_edge; ++x) sum += static_cast<double>(row[x]);
          }
        }
        const double half = 0.5 * (block_edge - 1);
        found[static_cast<std::size_t>(layer)].push_back(
            {{static_cast<double>(p[0]) + half, static_cast<double>(p[1]) + half,
              static_cast<double>(p[2]) + half},
             sum / (block_edge * block_edge * block_edge)});
      }
    });
  });
  control.throw_if_cancelled();
  std::vector<BlockMean> out;
  for (const auto& layer : found) out.insert(out.end(), layer.begin(), layer.end());
  return out;
}

double median_of(std::vector<double> values) {
  auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

struct Fit {
  std::vector<Term> terms;
  Eigen::VectorXd coefficients;
  double scale = 0;      // robust standard deviation of a block's residual
  double criterion = 0;  // Bayesian information
  double inliers = 0;
};

Fit fit_degree(const std::vector<BlockMean>& blocks, int degree, const Vec3& middle, const Vec3& scale,
               double expected_scatter) {
  Fit fit;
  fit.terms = terms_of(degree);
  const auto n = static_cast<Eigen::Index>(blocks.size()), k = static_cast<Eigen::Index>(fit.terms.size());
  Eigen::MatrixXd design(n, k);
  Eigen::VectorXd values(n);
  for (Eigen::Index i = 0; i < n; ++i) {
    const BlockMean& b = blocks[static_cast<std::size_t>(i)];
    const auto px = powers((b.centre[0] - middle[0]) * scale[0]),
               py = powers((b.centre[1] - middle[1]) * scale[1]),
               pz = powers((b.centre[2] - middle[2]) * scale[2]);
    for (Eigen::Index j = 0; j < k; ++j) {
      const Term& t = fit.terms[static_cast<std::size_t>(j)];
      design(i, j) = px[static_cast<std::size_t>(t.x)] * py[static_cast<std::size_t>(t.y)] *
                     pz[static_cast<std::size_t>(t.z)];
    }
    values[i] = b.mean;
  }
  // Start at the median: pores only lower blocks, and half of the blocks are sound.
  std::vector<double> means;
  for (const BlockMean& b : blocks) means.push_back(b.mean);
  fit.coefficients = Eigen::VectorXd::Zero(k);
  fit.coefficients[0] = median_of(means);
  Eigen::VectorXd weights = Eigen::VectorXd::Ones(n);
  for (int iteration = 0; iteration < 25; ++iteration) {
    const Eigen::VectorXd residual = values - design * fit.coefficients;
    std::vector<double> upper;  // the upper side is free of pores
    for (Eigen::Index i = 0; i < n; ++i) {
      if (residual[i] > 0) upper.push_back(residual[i]);
    }
    const double spread = upper.empty() ? 0 : median_of(upper) / 0.6745;
    fit.scale = std::max({spread, expected_scatter, 1e-9});
    fit.inliers = 0;
    for (Eigen::Index i = 0; i < n; ++i) {
      const double u = residual[i] / (biweight * fit.scale);
      weights[i] = std::abs(u) < 1 ? (1 - u * u) * (1 - u * u) : 0;
      fit.inliers += weights[i] > 0;
    }
    const Eigen::MatrixXd weighted = weights.asDiagonal() * design;
    const Eigen::VectorXd next = (design.transpose() * weighted).ldlt().solve(weighted.transpose() * values);
    if (!next.allFinite()) break;
    const double change = (next - fit.coefficients).cwiseAbs().maxCoeff();
    fit.coefficients = next;
    if (change < 1e-4 * fit.scale) break;
  }
  // Residuals beyond the biweight's reach count as at its end, so that a model that throws blocks out gains
  // nothing.
  const Eigen::VectorXd residual = values - design * fit.coefficients;
  double cost = 0;
  for (Eigen::Index i = 0; i < n; ++i) {
    const double r = std::min(std::abs(residual[i]) / std::max(expected_scatter, 1e-9), biweight);
    cost += r * r;
  }
  fit.criterion = cost + static_cast<double>(k) * std::log(static_cast<double>(n));
  return fit;
}

}  // namespace

MaterialLevel fit_material_level(const VolumeSource& source, const FieldOfView& field,
                                 const GreyLevels& levels, const PartMap& part, const RunControl& control) {
  (void)field;  // PartMap::inside lies within it
  control.step("material level", 0);
  const auto margin = static_cast<std::int64_t>(
      std::ceil(clear_widths * std::sqrt(levels.blur_voxel * levels.blur_voxel + 1.0 / 12)));
  const std::vector<BlockMean> blocks = clear_blocks(source, part, margin, control);
  MaterialLevel out = MaterialLevel::constant(levels.material);
  out.standard_uncertainty = 0.005 * levels.contrast();
  if (blocks.size() < blocks_per_term) {
    out.warnings.emplace_back(
        "the part is too thin to follow its grey level from place to place: one level is used");
    return out;
  }
  Vec3 low{1e300, 1e300, 1e300}, high{-1e300, -1e300, -1e300};
  for (const BlockMean& b : blocks) {
    for (std::size_t a = 0; a < 3; ++a) {
      low[a] = std::min(low[a], b.centre[a]);
      high[a] = std::max(high[a], b.centre[a]);
    }
  }
  const Vec3 middle = 0.5 * (low + high);
  Vec3 scale;
  for (std::size_t a = 0; a < 3; ++a)
    scale[a] = 2 / std::max(high[a] - low[a], static_cast<double>(block_edge));
  const double voxels = block_edge * block_edge * block_edge;
  const double correlated = levels.noise_is_white ? 1 : 8;
  const double expected = levels.material_noise * std::sqrt(correlated / voxels);

  Fit best;
  for (const int degree : {0, 2, 4}) {
    const Fit fit = fit_degree(blocks, degree, middle, scale, expected);
    if (blocks.size() < blocks_per_term * fit.terms.size()) break;
    if (best.terms.empty() || fit.criterion < best.criterion) best = fit;
  }
  if (best.terms.empty()) return out;
  auto model = std::make_shared<MaterialLevel::Model>();
  model->terms = best.terms;
  model->coefficients.assign(best.coefficients.data(), best.coefficients.data() + best.coefficients.size());
  model->middle = middle;
  model->scale = scale;
  out.model = model;
  double least = 1e300, most = -1e300;
  for (const BlockMean& b : blocks) {
    const double level = out.at(b.centre[0], b.centre[1], b.centre[2]);
    least = std::min(least, level);
    most = std::max(most, level);
  }
  out.spread_percent = 100 * (most - least) / levels.contrast();
  const double noise =
      best.scale * std::sqrt(static_cast<double>(best.terms.size()) / std::max(best.inliers, 1.0));
  // What the blocks scatter beyond their noise is unmodelled structure (rings, streaks).
  const double structure = std::sqrt(std::max(0.0, best.scale * best.scale - expected * expected));
  out.standard_uncertainty = std::sqrt(noise * noise + 0.25 * structure * structure);
  control.step("material level", 1);
  return out;
}

}  // namespace halfmark
