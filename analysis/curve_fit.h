// Least squares for models of a few parameters: Levenberg's damped steps (Marquardt 1963).
#pragma once

#include <Eigen/Cholesky>
#include <Eigen/Core>
#include <cmath>
#include <vector>

namespace halfmark {

template <int count>
using Parameters = Eigen::Matrix<double, count, 1>;

template <int count>
struct Linearised {
  double value = 0;
  Parameters<count> slope;  // of the value, by parameter
};

template <int count>
struct CurveFit {
  Parameters<count> p;
  double cost = 0;                              // sum of squared residuals
  Eigen::Matrix<double, count, count> normal;   // of the last linearisation: its inverse times the residual's
                                                // variance is the covariance
  double residual(std::size_t samples) const {  // standard deviation
    return std::sqrt(cost / static_cast<double>(samples - static_cast<std::size_t>(count)));
  }
};

struct FitLimits {
  int most_steps = 12;
  double settled = 1e-7;  // relative fall of the cost below which the fit has settled
};

// Fits value_of(sample, p) to sample.grey from a start. linearised(sample, p) also gives the slopes; bound(p)
// brings parameters back into their range after each step.
template <int count, class Sample, class Value, class Linearise, class Bound>
CurveFit<count> fit_curve(const std::vector<Sample>& samples, const Parameters<count>& start,
                          const Value& value_of, const Linearise& linearised, const Bound& bound,
                          const FitLimits& limits = {}) {
  const auto cost_of = [&](const Parameters<count>& q) {
    double sum = 0;
    for (const Sample& s : samples) {
      const double r = s.grey - value_of(s, q);
      sum += r * r;
    }
    return sum;
  };
  CurveFit<count> fit{start, cost_of(start), {}};
  double damping = 1e-3;
  for (int step = 0; step < limits.most_steps; ++step) {
    fit.normal.setZero();
    Parameters<count> gradient = Parameters<count>::Zero();
    for (const Sample& s : samples) {
      const Linearised<count> at = linearised(s, fit.p);
      fit.normal.noalias() += at.slope * at.slope.transpose();
      gradient += (s.grey - at.value) * at.slope;
    }
    bool better = false, settled = false;
    for (int attempt = 0; attempt < 6 && !better; ++attempt) {
      auto damped = fit.normal;
      damped.diagonal() *= 1 + damping;
      Parameters<count> next = fit.p + damped.ldlt().solve(gradient);
      bound(next);
      const double next_cost = cost_of(next);
      better = next_cost < fit.cost;
      if (better) {
        settled = fit.cost - next_cost < limits.settled * fit.cost;
        fit.p = next;
        fit.cost = next_cost;
        damping *= 0.2;
      } else {
        damping *= 8;
      }
    }
    if (!better || settled) break;
  }
  return fit;
}

}  // namespace halfmark
