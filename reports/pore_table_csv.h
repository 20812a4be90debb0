// pores.csv: one line a pore, largest first, UTF-8. No cell can start a formula in a spreadsheet.
#pragma once

#include <string>

#include "analysis/inspection_result.h"

namespace halfmark {

std::string pores_to_csv(const Inspection& inspection, bool semicolon = false);

}  // namespace halfmark
