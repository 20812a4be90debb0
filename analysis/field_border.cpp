#include "analysis/field_border.h"

namespace halfmark {

bool reaches_border(const Run& run, std::int64_t y, std::int64_t z, const RunMask& field) {
  if (y == 0 || z == 0 || y + 1 == field.size()[1] || z + 1 == field.size()[2]) return true;
  const auto row = field.row(y, z);
  if (row.empty() || run.begin <= row.front().begin || run.end >= row.back().end) return true;
  const auto covers = [&](std::span<const Run> r) {
    return !r.empty() && r.front().begin <= run.begin && r.back().end >= run.end;
  };
  return !(covers(field.row(y - 1, z)) && covers(field.row(y + 1, z)) && covers(field.row(y, z - 1)) &&
           covers(field.row(y, z + 1)));
}

}  // namespace halfmark
