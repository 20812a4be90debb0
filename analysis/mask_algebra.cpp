// Set operations on masks, row by row.
#include <algorithm>

#include "analysis/mask_morphology.h"

namespace halfmark {

namespace {

void add_complement(std::span<const Run> row, std::int32_t width, RunMask& out) {
  std::int32_t at = 0;
  for (const Run& run : row) {
    if (run.begin > at) out.add_run({at, run.begin});
    at = run.end;
  }
  if (at < width) out.add_run({at, width});
  out.end_row();
}

void add_intersection(std::span<const Run> a, std::span<const Run> b, RunMask& out) {
  std::size_t i = 0, j = 0;
  while (i < a.size() && j < b.size()) {
    const std::int32_t begin = std::max(a[i].begin, b[j].begin);
    const std::int32_t end = std::min(a[i].end, b[j].end);
    if (begin < end) out.add_run({begin, end});
    if (a[i].end < b[j].end) {
      ++i;
    } else {
      ++j;
    }
  }
  out.end_row();
}

void add_union(std::span<const Run> a, std::span<const Run> b, RunMask& out) {
  std::size_t i = 0, j = 0;
  Run open{0, -1};
  while (i < a.size() || j < b.size()) {
    const bool take_a = j == b.size() || (i < a.size() && a[i].begin <= b[j].begin);
    const Run next = take_a ? a[i++] : b[j++];
    if (open.end < 0) {
      open = next;
    } else if (next.begin <= open.end) {
      open.end = std::max(open.end, next.end);
    } else {
      out.add_run(open);
      open = next;
    }
  }
  if (open.end >= 0) out.add_run(open);
  out.end_row();
}

void add_difference(std::span<const Run> a, std::span<const Run> b, RunMask& out) {
  std::size_t j = 0;
  for (const Run& run : a) {
    std::int32_t at = run.begin;
    while (j < b.size() && b[j].end <= at) ++j;
    for (std::size_t k = j; k < b.size() && b[k].begin < run.end; ++k) {
      if (b[k].begin > at) out.add_run({at, b[k].begin});
      at = std::max(at, b[k].end);
    }
    if (at < run.end) out.add_run({at, run.end});
  }
  out.end_row();
}

template <class AddRow>
RunMask by_rows(const RunMask& a, const RunMask& b, AddRow add_row) {
  RunMask out(a.size());
  for (std::int64_t z = 0; z < a.size()[2]; ++z) {
    for (std::int64_t y = 0; y < a.size()[1]; ++y) add_row(a.row(y, z), b.row(y, z), out);
  }
  return out;
}

}  // namespace

RunMask complement(const RunMask& mask) {
  RunMask out(mask.size());
  const auto width = static_cast<std::int32_t>(mask.size()[0]);
  for (std::int64_t z = 0; z < mask.size()[2]; ++z) {
    for (std::int64_t y = 0; y < mask.size()[1]; ++y) add_complement(mask.row(y, z), width, out);
  }
  return out;
}

RunMask intersection(const RunMask& a, const RunMask& b) { return by_rows(a, b, add_intersection); }
RunMask union_of(const RunMask& a, const RunMask& b) { return by_rows(a, b, add_union); }
RunMask difference(const RunMask& a, const RunMask& b) { return by_rows(a, b, add_difference); }

RunMask padded(const RunMask& mask, std::int64_t margin) {
  const auto& from = mask.size();
  const std::array<std::int64_t, 3> size{from[0] + 2 * margin, from[1] + 2 * margin, from[2] + 2 * margin};
  RunMask out(size);
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      const std::int64_t sy = y - margin, sz = z - margin;
      if (sy >= 0 && sz >= 0 && sy < from[1] && sz < from[2]) {
        for (const Run& run : mask.row(sy, sz)) {
          const auto begin = static_cast<std::int32_t>(std::max<std::int64_t>(run.begin + margin, 0));
          const auto end = static_cast<std::int32_t>(std::min<std::int64_t>(run.end + margin, size[0]));
          if (begin < end) out.add_run({begin, end});
        }
      }
      out.end_row();
    }
  }
  return out;
}

RunMask selected(const RunLabels& labels, const std::vector<std::uint8_t>& keep) {
  RunMask out(labels.size());
  for (std::int64_t z = 0; z < labels.size()[2]; ++z) {
    for (std::int64_t y = 0; y < labels.size()[1]; ++y) {
      for (const LabelRun& run : labels.row(y, z)) {
        if (keep[static_cast<std::size_t>(run.label)] != 0) out.add_run({run.begin, run.end});
      }
      out.end_row();
    }
  }
  return out;
}

}  // namespace halfmark
