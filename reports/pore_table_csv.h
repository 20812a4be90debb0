// pores.csv: one line a pore, largest first, UTF-8, RFC 4180 quoting, lines end with LF.
//
// An empty cell was not measured. Numbers have six significant digits whatever the locale. No cell can start
// a formula in a spreadsheet: a text that starts with = + - @ or a control character gets a leading
// apostrophe; a number is written with digits, one decimal sign and at most a leading minus sign, which
// spreadsheets read as a number.
#pragma once

#include <string>

#include "analysis/inspection_result.h"

namespace halfmark {

std::string pores_to_csv(const Inspection& inspection, bool semicolon = false);

}  // namespace halfmark
