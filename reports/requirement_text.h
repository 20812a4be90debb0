// A requirement in words, the same on the terminal, in reports and in the viewer.
#pragma once

#include <string>
#include <vector>

#include "analysis/inspection_result.h"

namespace halfmark {

// "largest pore diameter in flange, pores below 0.3 mm ignored"
std::string requirement_words(const Requirement& requirement);
// "largest pore diameter"
std::string quantity_words(const Requirement& requirement);
// "at most 0.5 %", "at least 1.8 mm", "1.8 to 2.4 mm"
std::string limit_words(const RequirementResult& result);
// "0.62 ± 0.05 %", or "not measured"
std::string value_words(const RequirementResult& result);
// Distance to the nearest limit in the requirement's unit, positive on the good side; NaN without value or
// limit.
double margin(const RequirementResult& result);
std::string margin_words(const RequirementResult& result);
// "12 pores: 11 closed, 1 open; porosity 0.62 ± 0.05 %"
std::string pore_words(const Inspection& inspection);
// Of levels, requirements and inspection, each once, in that order.
std::vector<std::string> all_warnings(const Inspection& inspection);
// "bracket, drawing B-1042, revision C"; the spec's title when the part has no name
std::string part_words(const Inspection& inspection);

}  // namespace halfmark
