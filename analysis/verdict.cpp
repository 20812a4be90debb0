#include "analysis/verdict.h"

#include <algorithm>
#include <cmath>

#include "analysis/normal_distribution.h"
#include "analysis/number_text.h"

namespace halfmark {

namespace {

// Newton's method on the normal distribution; a start near the middle of its steep part converges for 0.5 < p
// < 1.
double normal_quantile(double p) {
  double z = 0;
  for (int i = 0; i < 100; ++i) {
    const double step = (normal_distribution(z) - p) / normal_density(z);
    z -= std::clamp(step, -1.0, 1.0);
    if (std::abs(step) < 1e-14) break;
  }
  return z;
}

std::string with_unit(double value, const std::string& unit) {
  return number_text(value) + (unit.empty() ? "" : " " + unit);
}

constexpr const char* beyond_words =
    ", but blur and noise hide pores as small as the limit in this scan: that there is none is not shown";

struct Sides {
  bool met, broken;
};

// `margin`: how far inside the limit the value lies; guard: the uncertainty that counts.
Sides sides_of(double margin, double guard) { return {margin >= guard, margin < -guard}; }

}  // namespace

double coverage_factor(const DecisionSpec& decision) {
  if (decision.coverage_factor) return *decision.coverage_factor;
  if (decision.conformance_probability) return normal_quantile(*decision.conformance_probability);
  return 2;
}

double conformance_probability(double value, double standard_uncertainty, std::optional<double> min,
                               std::optional<double> max) {
  if (!(standard_uncertainty > 0)) return (!max || value <= *max) && (!min || value >= *min) ? 1 : 0;
  const double below_max = max ? normal_distribution((*max - value) / standard_uncertainty) : 1,
               below_min = min ? normal_distribution((*min - value) / standard_uncertainty) : 0;
  return std::max(0.0, below_max - below_min);
}

double nonconformance_probability(double value, double standard_uncertainty, double max) {
  if (!(standard_uncertainty > 0)) return value > max ? 1 : 0;
  return normal_distribution((value - max) / standard_uncertainty);
}

void judge(RequirementResult& r, const DecisionSpec& decision) {
  r.coverage_factor = coverage_factor(decision);
  r.expanded_uncertainty = r.coverage_factor * r.measured.standard_uncertainty;
  if (!r.has_value) {
    r.verdict = r.met_without_value && !r.beyond_the_scan ? Verdict::accept : Verdict::undecided;
    if (r.met_without_value && r.beyond_the_scan) r.reason += beyond_words;
    return;
  }
  const double guard = decision.rule == DecisionRule::guarded ? r.expanded_uncertainty : 0;
  bool met = true, broken = false;
  double limit = 0;
  const char* side = "limit";
  const auto look = [&](double margin, double at, const char* name) {
    const Sides s = sides_of(margin, guard);
    if (!s.met && (met || s.broken)) {
      limit = at;
      side = name;
    }
    met = met && s.met;
    broken = broken || s.broken;
    if (met) {
      limit = at;
      side = name;
    }
  };
  if (r.requirement.max)
    look(*r.requirement.max - r.measured.value, *r.requirement.max, "largest permitted value");
  if (r.requirement.min)
    look(r.measured.value - *r.requirement.min, *r.requirement.min, "least permitted value");
  // A value that can only grow proves nothing against a largest permitted value.
  const bool unproved = met && r.lower_bound && r.requirement.max.has_value();
  r.verdict = broken                                   ? Verdict::reject
              : met && !unproved && !r.beyond_the_scan ? Verdict::accept
                                                       : Verdict::undecided;
  const std::string subject = (r.evidence.what.empty() ? std::string("measured") : r.evidence.what) + ": " +
                              measured_text(r.measured.value, r.expanded_uncertainty, r.unit);
  if (broken) {
    r.reason = subject + " breaks the " + side + " of " + with_unit(limit, r.unit);
  } else if (unproved) {
    r.reason = subject + " keeps the " + side + " of " + with_unit(limit, r.unit) +
               (r.requirement.quantity == Quantity::wall_thickness
                    ? ", but walls are measured up to wall_thickness.max_mm only and may be thicker"
                    : ", but a pore is cut by the field of view and may be larger");
  } else if (met) {
    r.reason = subject + " keeps the " + side + " of " + with_unit(limit, r.unit) +
               (r.beyond_the_scan ? beyond_words : "");
  } else {
    r.reason = subject + " lies too near the " + side + " of " + with_unit(limit, r.unit) +
               " to decide with this uncertainty";
  }
}

Verdict overall_verdict(const std::vector<RequirementResult>& results) {
  const auto any = [&](Verdict v) {
    return std::any_of(results.begin(), results.end(),
                       [v](const RequirementResult& r) { return r.verdict == v; });
  };
  if (any(Verdict::reject)) return Verdict::reject;
  return results.empty() || any(Verdict::undecided) ? Verdict::undecided : Verdict::accept;
}

void judge_pores(std::vector<Pore>& pores, const std::vector<RequirementResult>& results,
                 const DecisionSpec& decision) {
  const double k = coverage_factor(decision);
  const bool guarded = decision.rule == DecisionRule::guarded;
  for (Pore& pore : pores) {
    pore.verdict = Verdict::accept;
    if (pore.left_out || !pore.disposition.empty()) continue;
    for (const RequirementResult& r : results) {
      const Requirement& q = r.requirement;
      if (std::find(pore.zones.begin(), pore.zones.end(), q.zone) == pore.zones.end()) continue;
      if (q.ignore_below_mm && pore.equivalent_diameter_mm < *q.ignore_below_mm) continue;
      const bool inclusion = pore.kind == PoreKind::inclusion;
      double margin = 0, u = pore.diameter_standard_uncertainty_mm;
      // Lengths and depths: that of the deciding pore, which the calipers make alike for all.
      const double own = r.measured.standard_uncertainty;
      if (q.quantity == Quantity::pore_diameter && !inclusion && q.max) {
        margin = *q.max - pore.equivalent_diameter_mm;
      } else if (q.quantity == Quantity::inclusion_diameter && inclusion && q.max) {
        margin = *q.max - pore.equivalent_diameter_mm;
      } else if (q.quantity == Quantity::pore_length && !inclusion && q.max) {
        margin = *q.max - pore.length_mm;
        u = std::max(u, own);
      } else if (q.quantity == Quantity::pore_depth && pore.kind == PoreKind::closed && q.min &&
                 !std::isnan(pore.depth_mm)) {
        margin = pore.depth_mm - *q.min;
        u = own;
      } else {
        continue;
      }
      const Sides s = sides_of(margin, guarded ? k * u : 0);
      if (s.broken) pore.verdict = Verdict::reject;
      if (!s.broken && !s.met && pore.verdict == Verdict::accept) pore.verdict = Verdict::undecided;
    }
  }
}

}  // namespace halfmark
