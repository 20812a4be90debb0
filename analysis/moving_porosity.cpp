#include "analysis/moving_porosity.h"

#include <algorithm>
#include <cmath>

namespace halfmark {

namespace {

constexpr double least_part_share = 0.8;
constexpr double least_section_share = 0.1;
constexpr int steps_per_body = 8;
// Cells of a grid, at most: beyond, cells grow.
constexpr std::int64_t most_cells = 40'000'000;

double percent(std::int64_t pore, std::int64_t part) {
  return 100.0 * static_cast<double>(pore) / PoreField::unit / static_cast<double>(part);
}

// A body's size is met to this share of it, or to the nearest voxel.
constexpr double size_share = 0.01;

// Cells of a body of size_mm: at most an eighth of it, such that a whole number of them is the body.
std::int64_t cell_of(double size_mm, double spacing_mm) {
  const double size = std::max(1.0, std::round(size_mm / spacing_mm));
  std::int64_t cell = std::max<std::int64_t>(1, static_cast<std::int64_t>(size / steps_per_body));
  const auto misfit = [&](std::int64_t c) {
    const double edge = static_cast<double>(c);
    return std::abs(std::round(size / edge) * edge - size);
  };
  while (cell > 1 && misfit(cell) > size_share * size) --cell;
  return cell;
}

std::int64_t cells_of(double size_mm, double spacing_mm, std::int64_t cell) {
  const double size = std::max(1.0, std::round(size_mm / spacing_mm));
  return std::max<std::int64_t>(1, std::llround(size / static_cast<double>(cell)));
}

std::int64_t least_voxels(double share, double of) {
  return static_cast<std::int64_t>(std::ceil(share * of - 1e-9));
}

// Cells that lie wholly in the volume.
std::array<std::int64_t, 3> whole_cells(const CellSums& cells, const std::array<std::int64_t, 3>& size) {
  return {size[0] / cells.cell[0], size[1] / cells.cell[1], size[2] / cells.cell[2]};
}

void limit_cells(std::array<std::int64_t, 3>& cell, const std::array<std::int64_t, 3>& size, int fixed_axis) {
  const auto cells = [&] {
    std::int64_t n = 1;
    for (std::size_t a = 0; a < 3; ++a) n *= (size[a] + cell[a] - 1) / cell[a];
    return n;
  };
  while (cells() > most_cells) {
    for (int a = 0; a < 3; ++a) {
      if (a != fixed_axis) ++cell[static_cast<std::size_t>(a)];
    }
  }
}

// Sums over a box of cells from running sums along all axes.
class BoxSums {
 public:
  explicit BoxSums(const CellSums& cells, const std::vector<std::int64_t>& values) : n_(cells.count) {
    sums_.assign(static_cast<std::size_t>((n_[0] + 1) * (n_[1] + 1) * (n_[2] + 1)), 0);
    for (std::int64_t z = 0; z < n_[2]; ++z) {
      for (std::int64_t y = 0; y < n_[1]; ++y) {
        std::int64_t row = 0;
        for (std::int64_t x = 0; x < n_[0]; ++x) {
          row += values[cells.at(x, y, z)];
          sums_[at(x + 1, y + 1, z + 1)] =
              row + sums_[at(x + 1, y, z + 1)] + sums_[at(x + 1, y + 1, z)] - sums_[at(x + 1, y, z)];
        }
      }
    }
  }
  std::int64_t of(const std::array<std::int64_t, 3>& b, const std::array<std::int64_t, 3>& e) const {
    return sums_[at(e[0], e[1], e[2])] - sums_[at(b[0], e[1], e[2])] - sums_[at(e[0], b[1], e[2])] -
           sums_[at(e[0], e[1], b[2])] + sums_[at(b[0], b[1], e[2])] + sums_[at(b[0], e[1], b[2])] +
           sums_[at(e[0], b[1], b[2])] - sums_[at(b[0], b[1], b[2])];
  }

 private:
  std::size_t at(std::int64_t x, std::int64_t y, std::int64_t z) const {
    return static_cast<std::size_t>((z * (n_[1] + 1) + y) * (n_[0] + 1) + x);
  }
  std::array<std::int64_t, 3> n_;
  std::vector<std::int64_t> sums_;
};

// Moves a box of `width` cells over the grid.
std::optional<WorstPlace> worst_box(const CellSums& cells, const std::array<std::int64_t, 3>& whole,
                                    const std::array<std::int64_t, 3>& width, std::int64_t least_part) {
  for (std::size_t a = 0; a < 3; ++a) {
    if (width[a] > whole[a]) return std::nullopt;
  }
  const BoxSums pore(cells, cells.pore), part(cells, cells.part);
  std::optional<WorstPlace> worst;
  std::array<std::int64_t, 3> b{};
  for (b[2] = 0; b[2] + width[2] <= whole[2]; ++b[2]) {
    for (b[1] = 0; b[1] + width[1] <= whole[1]; ++b[1]) {
      for (b[0] = 0; b[0] + width[0] <= whole[0]; ++b[0]) {
        const std::array<std::int64_t, 3> e{b[0] + width[0], b[1] + width[1], b[2] + width[2]};
        const std::int64_t part_voxels = part.of(b, e);
        if (part_voxels < least_part || part_voxels == 0) continue;
        const double value = std::max(0.0, percent(pore.of(b, e), part_voxels));
        if (worst && value <= worst->percent) continue;
        WorstPlace place;
        place.percent = value;
        for (std::size_t a = 0; a < 3; ++a) {
          place.begin[a] = b[a] * cells.cell[a];
          place.end[a] = e[a] * cells.cell[a];
          place.index[a] = 0.5 * static_cast<double>(place.begin[a] + place.end[a] - 1);
        }
        worst = place;
      }
    }
  }
  return worst;
}

// Moves a ball of radius_mm (about cell middles) over the grid.
std::optional<WorstPlace> worst_ball(const CellSums& cells, const VolumeGeometry& g, double radius_mm) {
  const std::array<std::int64_t, 3> whole = whole_cells(cells, g.size);
  struct Offset {
    std::int64_t x, y, z;
  };
  std::vector<Offset> ball;
  std::array<std::int64_t, 3> reach;
  Vec3 edge;
  for (std::size_t a = 0; a < 3; ++a) {
    edge[a] = static_cast<double>(cells.cell[a]) * g.spacing_mm[a];
    reach[a] = static_cast<std::int64_t>(radius_mm / edge[a]);
  }
  for (std::int64_t z = -reach[2]; z <= reach[2]; ++z) {
    for (std::int64_t y = -reach[1]; y <= reach[1]; ++y) {
      for (std::int64_t x = -reach[0]; x <= reach[0]; ++x) {
        if (length(Vec3{static_cast<double>(x) * edge[0], static_cast<double>(y) * edge[1],
                        static_cast<double>(z) * edge[2]}) <= radius_mm)
          ball.push_back({x, y, z});
      }
    }
  }
  const double ball_voxels =
      static_cast<double>(ball.size()) * static_cast<double>(cells.cell[0] * cells.cell[1] * cells.cell[2]);
  std::optional<WorstPlace> worst;
  for (std::int64_t z = reach[2]; z + reach[2] < whole[2]; ++z) {
    for (std::int64_t y = reach[1]; y + reach[1] < whole[1]; ++y) {
      for (std::int64_t x = reach[0]; x + reach[0] < whole[0]; ++x) {
        if (cells.part[cells.at(x, y, z)] == 0) continue;
        std::int64_t pore = 0, part = 0;
        for (const Offset& o : ball) {
          const std::size_t i = cells.at(x + o.x, y + o.y, z + o.z);
          pore += cells.pore[i];
          part += cells.part[i];
        }
        if (static_cast<double>(part) < least_part_share * ball_voxels) continue;
        const double value = std::max(0.0, percent(pore, part));
        if (worst && value <= worst->percent) continue;
        WorstPlace place;
        place.percent = value;
        const std::array<std::int64_t, 3> c{x, y, z};
        place.cell = cells.cell;
        place.ball_radius_mm = radius_mm;
        place.spacing_mm = g.spacing_mm;
        for (std::size_t a = 0; a < 3; ++a) {
          place.begin[a] = (c[a] - reach[a]) * cells.cell[a];
          place.end[a] = (c[a] + reach[a] + 1) * cells.cell[a];
          place.index[a] = (static_cast<double>(c[a]) + 0.5) * static_cast<double>(cells.cell[a]) - 0.5;
        }
        worst = place;
      }
    }
  }
  return worst;
}

}  // namespace

std::optional<WorstPlace> worst_section(const PoreField& field, const std::vector<std::uint8_t>& counts,
                                        const PartMap& part, const ZoneSet& zones, std::size_t zone,
                                        const VolumeGeometry& geometry, int axis,
                                        std::optional<double> window_mm) {
  std::array<std::int64_t, 3> cell = geometry.size, width{1, 1, 1};
  cell[static_cast<std::size_t>(axis)] = 1;
  if (window_mm) {
    for (std::size_t a = 0; a < 3; ++a) {
      if (static_cast<int>(a) != axis) cell[a] = cell_of(*window_mm, geometry.spacing_mm[a]);
    }
    limit_cells(cell, geometry.size, axis);
    for (std::size_t a = 0; a < 3; ++a) {
      if (static_cast<int>(a) != axis) width[a] = cells_of(*window_mm, geometry.spacing_mm[a], cell[a]);
    }
  }
  const CellSums cells = sum_cells(field, counts, part, zones, zone, cell);
  std::int64_t least = 0;
  if (window_mm) {
    least = least_voxels(least_part_share,
                         static_cast<double>(width[0] * cell[0] * width[1] * cell[1] * width[2] * cell[2]));
  } else {
    least = least_voxels(least_section_share,
                         static_cast<double>(*std::max_element(cells.part.begin(), cells.part.end())));
  }
  auto worst = worst_box(cells, whole_cells(cells, geometry.size), width, least);
  if (worst) {
    worst->axis = axis;
    worst->extent_mm = window_mm.value_or(0);
  }
  return worst;
}

std::optional<WorstPlace> worst_reference(const PoreField& field, const std::vector<std::uint8_t>& counts,
                                          const PartMap& part, const ZoneSet& zones, std::size_t zone,
                                          const VolumeGeometry& geometry, const ReferenceBody& body) {
  std::array<std::int64_t, 3> cell, width;
  for (std::size_t a = 0; a < 3; ++a) cell[a] = cell_of(body.size_mm, geometry.spacing_mm[a]);
  limit_cells(cell, geometry.size, -1);
  const CellSums cells = sum_cells(field, counts, part, zones, zone, cell);
  std::optional<WorstPlace> worst;
  if (body.sphere) {
    worst = worst_ball(cells, geometry, 0.5 * body.size_mm);
  } else {
    for (std::size_t a = 0; a < 3; ++a) width[a] = cells_of(body.size_mm, geometry.spacing_mm[a], cell[a]);
    const double voxels = static_cast<double>(width[0] * cell[0] * width[1] * cell[1] * width[2] * cell[2]);
    worst =
        worst_box(cells, whole_cells(cells, geometry.size), width, least_voxels(least_part_share, voxels));
  }
  if (worst) worst->extent_mm = body.size_mm;
  return worst;
}

ZoneSums sum_place(const PoreField& field, std::size_t pore_count, const PartMap& part, const ZoneSet& zones,
                   std::size_t zone, const WorstPlace& place) {
  const auto holds = [&](std::int64_t x, std::int64_t y, std::int64_t z) {
    const std::array<std::int64_t, 3> at{x, y, z};
    Vec3 off{};
    for (std::size_t a = 0; a < 3; ++a) {
      if (at[a] < place.begin[a] || at[a] >= place.end[a]) return false;
      const double edge = static_cast<double>(place.cell[a]);
      const double middle = (std::floor(static_cast<double>(at[a]) / edge) + 0.5) * edge - 0.5;
      off[a] = (middle - place.index[a]) * place.spacing_mm[a];
    }
    return place.ball_radius_mm == 0 || length(off) <= place.ball_radius_mm * (1 + 1e-12);
  };
  return sum_zone_where(field, pore_count, part, zones, zone, holds);
}

}  // namespace halfmark
