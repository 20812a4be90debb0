// Limits and decision rules: accept, reject or undecided (ISO 14253-1, JCGM 106). Never sees voxels.
#pragma once

#include <optional>
#include <vector>

#include "analysis/inspection_result.h"

namespace halfmark {

// Coverage factor of the rule: the spec's, or the one-sided normal quantile of its conformance probability,
// or 2.
double coverage_factor(const DecisionSpec& decision);

// Sets verdict, expanded uncertainty, coverage factor and reason of a measured requirement.
// guarded: accept if value + U <= max (and value - U >= min), reject if value - U > max (or value + U < min),
// else undecided.
void judge(RequirementResult& result, const DecisionSpec& decision);
// Reject if any is, else undecided if any is (or there is none), else accept.
Verdict overall_verdict(const std::vector<RequirementResult>& results);
// A pore's own verdict: reject if it alone breaks a requirement, undecided if it may, else accept.
void judge_pores(std::vector<Pore>& pores, const std::vector<RequirementResult>& results,
                 const DecisionSpec& decision);

// Probability that the true value lies within the limits (JCGM 106:2012, clause 7), given a normal
// distribution about the measured value: Phi((max - value) / u) - Phi((min - value) / u). A limit that is not
// given holds always; standard_uncertainty > 0.
double conformance_probability(double value, double standard_uncertainty, std::optional<double> min,
                               std::optional<double> max);
// The rest for one upper limit: 1 - Phi((max - value) / u), without loss of digits where it is small.
double nonconformance_probability(double value, double standard_uncertainty, double max);

}  // namespace halfmark
