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
