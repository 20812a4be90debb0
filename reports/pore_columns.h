// The pore list of result.json: one list a column, all of one length, in the order of the pores.
#pragma once

#include <vector>

#include "analysis/pores.h"
#include "reports/json_value.h"

namespace halfmark {

Json pores_to_columns(const std::vector<Pore>& pores);
// Throws Problem(bad_data) when a column is missing or of another length.
std::vector<Pore> pores_from_columns(const JsonPlace& columns);

}  // namespace halfmark
