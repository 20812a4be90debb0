#include "analysis/solid_crowd.h"

#include <algorithm>
#include <cmath>

namespace halfmark {

namespace {

// So few parts are asked one by one.
constexpr std::size_t few_parts = 6;
// The grid has about this many cells per part, and never more along an axis than the second number.
constexpr double cells_per_part = 4, most_cells_per_axis = 64;
constexpr double far_away_mm = 1e300;

double distance_to(const SolidBounds& b, const Vec3& p) {
  Vec3 d;
  for (std::size_t a = 0; a < 3; ++a) d[a] = std::max({b.min_mm[a] - p[a], 0.0, p[a] - b.max_mm[a]});
  return length(d);
}

}  // namespace

SolidCrowd::SolidCrowd(std::vector<SolidPtr> parts) : parts_(std::move(parts)) {
  if (parts_.empty()) return;
  std::vector<SolidBounds> part_bounds;
  for (const SolidPtr& part : parts_) part_bounds.push_back(part->bounds());
  bounds_ = part_bounds[0];
  for (const SolidBounds& b : part_bounds) {
    for (std::size_t a = 0; a < 3; ++a) {
      bounds_.min_mm[a] = std::min(bounds_.min_mm[a], b.min_mm[a]);
      bounds_.max_mm[a] = std::max(bounds_.max_mm[a], b.max_mm[a]);
    }
  }
  const Vec3 size = bounds_.max_mm - bounds_.min_mm;
  const double widest = std::max({size[0], size[1], size[2]});
  if (parts_.size() > few_parts && widest > 0) {
    const double volume = std::max(size[0], 1e-3 * widest) * std::max(size[1], 1e-3 * widest) *
                          std::max(size[2], 1e-3 * widest);
    edge_mm_ = std::max(std::cbrt(volume / (cells_per_part * static_cast<double>(parts_.size()))),
                        widest / most_cells_per_axis);
    for (std::size_t a = 0; a < 3; ++a) cells_[a] = static_cast<std::size_t>(size[a] / edge_mm_) + 1;
  }
  near_.resize(cells_[0] * cells_[1] * cells_[2]);
  for (std::uint32_t i = 0; i < parts_.size(); ++i) {
    std::array<std::size_t, 3> first{0, 0, 0}, last{0, 0, 0};
    for (std::size_t a = 0; a < 3 && edge_mm_ > 0; ++a) {
      const auto cell = [&](double mm) {
        const double c = std::floor((mm - bounds_.min_mm[a]) / edge_mm_);
        return static_cast<std::size_t>(std::clamp(c, 0.0, static_cast<double>(cells_[a] - 1)));
      };
      first[a] = cell(part_bounds[i].min_mm[a] - 2 * edge_mm_);
      last[a] = cell(part_bounds[i].max_mm[a] + 2 * edge_mm_);
    }
    for (std::size_t z = first[2]; z <= last[2]; ++z) {
      for (std::size_t y = first[1]; y <= last[1]; ++y) {
        for (std::size_t x = first[0]; x <= last[0]; ++x)
          near_[(z * cells_[1] + y) * cells_[0] + x].push_back(i);
      }
    }
  }
}

std::size_t SolidCrowd::cell_of(const Vec3& mm) const {
  std::array<std::size_t, 3> cell{0, 0, 0};
  for (std::size_t a = 0; a < 3; ++a) {
    const double c = (mm[a] - bounds_.min_mm[a]) / edge_mm_;
    cell[a] = static_cast<std::size_t>(std::clamp(c, 0.0, static_cast<double>(cells_[a] - 1)));
  }
  return (cell[2] * cells_[1] + cell[1]) * cells_[0] + cell[0];
}

double SolidCrowd::signed_distance_mm(const Vec3& mm) const {
  if (parts_.empty()) return far_away_mm;
  double least = far_away_mm;
  std::size_t cell = 0;
  if (edge_mm_ > 0) {
    // Parts not listed in the cell of the nearest point of the bounds are two edges or more from that point.
    const double beyond = distance_to(bounds_, mm);
    if (beyond >= edge_mm_) return beyond;
    least = 2 * edge_mm_ - beyond;
    cell = cell_of(mm);
  }
  for (const std::uint32_t i : near_[cell]) least = std::min(least, parts_[i]->signed_distance_mm(mm));
  return least;
}

}  // namespace halfmark
