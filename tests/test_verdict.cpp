#include <cmath>

#include "analysis/verdict.h"
#include "tests/support/catch.h"

using namespace halfmark;

namespace {

Verdict verdict_of(double value, double u, std::optional<double> min, std::optional<double> max,
                   const DecisionSpec& decision = {}) {
  RequirementResult r;
  r.requirement.min = min;
  r.requirement.max = max;
  r.has_value = true;
  r.measured.value = value;
  r.measured.standard_uncertainty = u;
  judge(r, decision);
  CHECK_FALSE(r.reason.empty());
  return r.verdict;
}

}  // namespace

TEST_CASE("guard bands of JCGM 106, one-sided normal") {
  DecisionSpec decision;
  decision.conformance_probability = 0.95;
  CHECK(coverage_factor(decision) == Approx(1.6449).margin(5e-5));
  decision.conformance_probability = 0.99;
  CHECK(coverage_factor(decision) == Approx(2.326).margin(5e-4));
  CHECK(coverage_factor({}) == 2);
  // P(nonconforming) at the guarded limit is the permitted risk.
  CHECK(nonconformance_probability(2 - 1.6449 * 0.25, 0.25, 2) == Approx(0.05).margin(1e-5));
}

TEST_CASE("conformance probability for one limit and for two") {
  CHECK(conformance_probability(2, 0.25, {}, 2) == Approx(0.5).margin(1e-15));
  CHECK(conformance_probability(2 - 1.6449 * 0.25, 0.25, {}, 2) == Approx(0.95).margin(1e-5));
  CHECK(conformance_probability(2 + 1.6449 * 0.25, 0.25, 2, {}) == Approx(0.95).margin(1e-5));
  // Within one standard uncertainty: the error function of 1 / sqrt(2).
  CHECK(conformance_probability(1, 0.25, 0.75, 1.25) == Approx(std::erf(std::sqrt(0.5))).margin(1e-15));
  CHECK(conformance_probability(1, 0.25, {}, {}) == 1);
  CHECK(conformance_probability(1.3, 0.2, {}, 1.7) + nonconformance_probability(1.3, 0.2, 1.7) ==
        Approx(1).margin(1e-15));
}

// JCGM 106:2012, 9.5.4: radial run-out of ball bearings, limit 2 µm, measured with u = 0.25 µm; the
// production's values have a gamma distribution of shape 4 and scale 1/4 µm.
TEST_CASE("the ball bearings of JCGM 106") {
  constexpr double limit_um = 2, u_um = 0.25;
  const auto production = [](double x) {  // density in 1/µm
    const double t = x / 0.25;
    return t * t * t * std::exp(-t) / (6 * 0.25);
  };
  // Share of the production that does not conform and is measured at most `accepted` (Simpson's rule).
  const auto consumer_risk = [&](double accepted_um) {
    constexpr int steps = 4000;
    constexpr double end_um = 12, step = (end_um - limit_um) / steps;
    double sum = 0;
    for (int i = 0; i <= steps; ++i) {
      const double x = limit_um + i * step, weight = i == 0 || i == steps ? 1 : i % 2 == 1 ? 4 : 2;
      sum += weight * production(x) * conformance_probability(x, u_um, {}, accepted_um);
    }
    return sum * step / 3;
  };
  const double nonconforming = consumer_risk(100), simple = consumer_risk(limit_um);
  INFO("nonconforming " << nonconforming << ", consumer's risk " << simple);
  CHECK(nonconforming == Approx(0.0423801).margin(5e-8));
  CHECK(simple == Approx(0.00801911).margin(5e-9));
  // The acceptance limit for a consumer's risk of 0.1 %.
  double low = 1, high = 2;
  for (int i = 0; i < 60; ++i) {
    const double middle = (low + high) / 2;
    (consumer_risk(middle) < 0.001 ? low : high) = middle;
  }
  INFO("acceptance limit " << low << " µm");
  CHECK(low == Approx(1.671829).margin(5e-7));
  // With that guard band the verdict changes at that limit.
  DecisionSpec decision;
  decision.coverage_factor = (limit_um - 1.671829) / u_um;
  CHECK(verdict_of(1.67182, u_um, {}, limit_um, decision) == Verdict::accept);
  CHECK(verdict_of(1.67184, u_um, {}, limit_um, decision) == Verdict::undecided);
}

TEST_CASE("guarded acceptance has three outcomes, simple acceptance two") {
  CHECK(verdict_of(0.79, 0.01, {}, 0.8) == Verdict::undecided);
  CHECK(verdict_of(0.77, 0.01, {}, 0.8) == Verdict::accept);
  CHECK(verdict_of(0.78, 0.01, {}, 0.8) == Verdict::accept);  // value + U exactly at the limit
  CHECK(verdict_of(0.81, 0.01, {}, 0.8) == Verdict::undecided);
  CHECK(verdict_of(0.83, 0.01, {}, 0.8) == Verdict::reject);
  CHECK(verdict_of(1.79, 0.01, 1.8, {}) == Verdict::undecided);
  CHECK(verdict_of(1.75, 0.01, 1.8, {}) == Verdict::reject);
  CHECK(verdict_of(1.85, 0.01, 1.8, 2.0) == Verdict::accept);
  CHECK(verdict_of(2.10, 0.01, 1.8, 2.0) == Verdict::reject);
  DecisionSpec simple;
  simple.rule = DecisionRule::simple;
  CHECK(verdict_of(0.799, 0.01, {}, 0.8, simple) == Verdict::accept);
  CHECK(verdict_of(0.801, 0.01, {}, 0.8, simple) == Verdict::reject);
}

TEST_CASE("a lower bound never proves a largest permitted value") {
  RequirementResult r;
  r.requirement.max = 1;
  r.has_value = true;
  r.measured = {0.5, 0.01, {}};
  r.lower_bound = true;
  judge(r, {});
  CHECK(r.verdict == Verdict::undecided);
  r.measured.value = 1.5;
  judge(r, {});
  CHECK(r.verdict == Verdict::reject);
}

TEST_CASE("the whole is reject if any is, else undecided if any is, else accept") {
  const auto whole = [](std::initializer_list<Verdict> verdicts) {
    std::vector<RequirementResult> results;
    for (const Verdict v : verdicts) {
      results.emplace_back();
      results.back().verdict = v;
    }
    return overall_verdict(results);
  };
  CHECK(whole({Verdict::accept, Verdict::accept}) == Verdict::accept);
  CHECK(whole({Verdict::accept, Verdict::undecided}) == Verdict::undecided);
  CHECK(whole({Verdict::undecided, Verdict::reject, Verdict::accept}) == Verdict::reject);
  CHECK(whole({}) == Verdict::undecided);
}

TEST_CASE("a limit below what the scan shows is never called met") {
  RequirementResult r;
  r.requirement.max = 0.1;
  r.unit = "mm";
  r.has_value = true;
  r.measured.value = 0.05;
  r.beyond_the_scan = true;
  judge(r, {});
  CHECK(r.verdict == Verdict::undecided);
  r.measured.value = 0.2;
  judge(r, {});
  CHECK(r.verdict == Verdict::reject);
  r.has_value = false;
  r.met_without_value = true;
  judge(r, {});
  CHECK(r.verdict == Verdict::undecided);
  r.beyond_the_scan = false;
  judge(r, {});
  CHECK(r.verdict == Verdict::accept);
}
