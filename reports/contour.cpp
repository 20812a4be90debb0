#include "reports/contour.h"

namespace halfmark {

namespace {

struct Cell {
  std::array<float, 4> value;  // (0,0) (1,0) (1,1) (0,1)
  float x, y;
};

// The crossing on edge e, which runs from corner e to corner e + 1.
std::array<float, 2> crossing(const Cell& cell, int e, float level) {
  static constexpr float corner_x[] = {0, 1, 1, 0}, corner_y[] = {0, 0, 1, 1};
  const int a = e, b = (e + 1) % 4;
  const float va = cell.value[static_cast<std::size_t>(a)], vb = cell.value[static_cast<std::size_t>(b)];
  const float t = (level - va) / (vb - va);
  return {cell.x + corner_x[a] + t * (corner_x[b] - corner_x[a]),
          cell.y + corner_y[a] + t * (corner_y[b] - corner_y[a])};
}

void cut(const Cell& cell, float level, std::vector<Segment>& out) {
  std::array<int, 4> edges;
  std::size_t count = 0;
  for (int e = 0; e < 4; ++e)
    if ((cell.value[static_cast<std::size_t>(e)] >= level) !=
        (cell.value[static_cast<std::size_t>((e + 1) % 4)] >= level))
      edges[count++] = e;
  const auto add = [&](int e, int f) {
    const auto p = crossing(cell, e, level), q = crossing(cell, f, level);
    out.push_back({p[0], p[1], q[0], q[1]});
  };
  if (count == 2) {
    add(edges[0], edges[1]);
  } else if (count == 4) {
    const float mean = 0.25f * (cell.value[0] + cell.value[1] + cell.value[2] + cell.value[3]);
    if ((mean >= level) == (cell.value[0] >= level)) {
      add(0, 1);
      add(2, 3);
    } else {
      add(3, 0);
      add(1, 2);
    }
  }
}

}  // namespace

std::vector<Segment> contour(const std::vector<float>& values, std::int64_t width, std::int64_t height,
                             float level) {
  std::vector<Segment> out;
  for (std::int64_t y = 0; y + 1 < height; ++y) {
    for (std::int64_t x = 0; x + 1 < width; ++x) {
      const float* at = values.data() + y * width + x;
      cut({{at[0], at[1], at[width + 1], at[width]}, static_cast<float>(x), static_cast<float>(y)}, level,
          out);
    }
  }
  return out;
}

}  // namespace halfmark
