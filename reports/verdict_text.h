// The verdict in words, as terminal, report and viewer say it.
#pragma once

#include <string>

#include "analysis/inspection_result.h"

namespace halfmark {

// A few lines: verdict, a line per requirement with limit, value +- uncertainty, verdict, reason.
std::string verdict_text(const Inspection& inspection);

}  // namespace halfmark
