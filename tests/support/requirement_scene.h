// A part made by hand, a block of voxels with box-shaped pores, and plain counts on it.
#pragma once

#include <algorithm>
#include <array>
#include <cmath>
#include <cstdint>
#include <functional>
#include <numbers>
#include <string>
#include <vector>

#include "analysis/requirement_measures.h"
#include "analysis/run_grid.h"
#include "analysis/surface.h"
#include "analysis/verdict.h"
#include "tests/support/label_runs.h"
#include "tests/support/phantoms.h"

namespace halfmark::tests {

using Index = std::array<std::int64_t, 3>;

// A box of voxels [low, high) as a pore.
struct BoxPore {
  Index low{}, high{};
  PoreKind kind = PoreKind::closed;
};

struct Scene {
  VolumeGeometry geometry;
  GreyLevels levels;
  PartMap part;
  SegmentedPores pores;
  InspectionSpec spec;
  Index block_low{4, 4, 4}, block_high{44, 40, 36};
  TriangleMesh surface;
  WallMap walls;
  bool has_walls = false;

  explicit Scene(const std::vector<BoxPore>& boxes) {
    geometry.size = {48, 44, 40};
    geometry.spacing_mm = {0.1, 0.1, 0.1};
    geometry.origin_mm = {5, -2, 1};
    levels.air = 0;
    levels.material = 1000;
    levels.threshold = 500;
    levels.threshold_standard_uncertainty = 2;
    levels.blur_voxel = 1;
    levels.blur_mm = 0.1;
    part.inside = mask_of(geometry.size, [&](auto x, auto y, auto z) { return in_block(x, y, z); });
    pores = pores_of(labels_of(geometry.size,
                               [&](auto x, auto y, auto z) {
                                 for (std::size_t i = 0; i < boxes.size(); ++i) {
                                   const BoxPore& b = boxes[i];
                                   if (x >= b.low[0] && x < b.high[0] && y >= b.low[1] && y < b.high[1] &&
                                       z >= b.low[2] && z < b.high[2])
                                     return static_cast<int>(i) + 1;
                                 }
                                 return 0;
                               }),
                     geometry);
    for (std::size_t i = 0; i < boxes.size(); ++i) {
      const BoxPore& b = boxes[i];
      Pore& p = pores.pores[i];
      Vec3 edge;
      for (std::size_t a = 0; a < 3; ++a)
        edge[a] = static_cast<double>(b.high[a] - b.low[a]) * geometry.spacing_mm[a];
      p.kind = b.kind;
      p.open = b.kind == PoreKind::open;
      p.cut_by_field = b.kind == PoreKind::cut_by_field;
      p.centre_mm = geometry.index_to_mm({0.5 * static_cast<double>(b.low[0] + b.high[0] - 1),
                                          0.5 * static_cast<double>(b.low[1] + b.high[1] - 1),
                                          0.5 * static_cast<double>(b.low[2] + b.high[2] - 1)});
      p.length_mm = std::max({edge[0], edge[1], edge[2]});
      p.width_mm = p.thickness_mm = std::min({edge[0], edge[1], edge[2]});
      const double v = p.volume_mm3.value;
      p.volume_mm3.contributions = {{"noise", 0.03 * v},
                                    {"local level", 0.02 * v},
                                    {"threshold", 0.01 * v},
                                    {"edge position", 0.005 * v}};
      p.volume_mm3.standard_uncertainty = v * std::sqrt(9e-4 + 4e-4 + 1e-4 + 0.25e-4);
      p.diameter_standard_uncertainty_mm =
          p.equivalent_diameter_mm * p.volume_mm3.standard_uncertainty / v / 3;
    }
    ZoneSpec all;
    all.id = "part";
    spec.zones.push_back(all);
  }

  bool in_block(std::int64_t x, std::int64_t y, std::int64_t z) const {
    return x >= block_low[0] && x < block_high[0] && y >= block_low[1] && y < block_high[1] &&
           z >= block_low[2] && z < block_high[2];
  }
  // The voxels [low, high) as a zone.
  void add_box(const std::string& id, const Index& low, const Index& high, ZoneUse use = ZoneUse::inspect) {
    ZoneSpec zone;
    zone.id = id;
    zone.shape = ZoneShape::box;
    zone.use = use;
    for (std::size_t a = 0; a < 3; ++a) {
      zone.min_mm[a] = geometry.origin_mm[a] + (static_cast<double>(low[a]) - 0.5) * geometry.spacing_mm[a];
      zone.max_mm[a] = geometry.origin_mm[a] + (static_cast<double>(high[a]) - 0.5) * geometry.spacing_mm[a];
    }
    spec.zones.push_back(zone);
  }
  Pore& pore(int id) { return pores.pores[static_cast<std::size_t>(id) - 1]; }

  RequirementResult measure(const Requirement& r) {
    const ZoneSet zones(spec, geometry, part);
    assign_zones(pores.pores, zones);
    MeasuredPart measured{geometry, levels, part, pores};
    measured.surface = &surface;
    if (has_walls) {
      measured.outer_surface = &surface;
      measured.walls = &walls;
    }
    return measure_requirement(r, spec, zones, measured);
  }
  RequirementResult measure(Quantity q, const std::string& zone = "part") {
    return measure(requirement(q, zone));
  }
  static Requirement requirement(Quantity q, const std::string& zone = "part") {
    Requirement r;
    r.id = "R";
    r.zone = zone;
    r.quantity = q;
    r.max = 1;
    return r;
  }

  std::int32_t label(std::int64_t x, std::int64_t y, std::int64_t z) const {
    for (const LabelRun& r : pores.field.labels.row(y, z)) {
      if (r.begin <= x && x < r.end) return r.label;
    }
    return 0;
  }
  // Over the voxels for which `in` holds: pore voxels that `counts` and part voxels.
  struct Counts {
    std::int64_t pore = 0, part = 0, all = 0;
    double percent() const { return 100.0 * static_cast<double>(pore) / static_cast<double>(part); }
  };
  Counts count(const std::function<bool(const Index&)>& in, const std::function<bool(int)>& counts) const {
    Counts out;
    for (std::int64_t z = 0; z < geometry.size[2]; ++z) {
      for (std::int64_t y = 0; y < geometry.size[1]; ++y) {
        for (std::int64_t x = 0; x < geometry.size[0]; ++x) {
          if (!in({x, y, z})) continue;
          const std::int32_t l = label(x, y, z);
          out.pore += l != 0 && counts(l);
          out.part += in_block(x, y, z);
          ++out.all;
        }
      }
    }
    return out;
  }
  // The pore's gap to another by brute force, mm.
  double gap(int a, int b) const {
    double least = 1e9;
    std::vector<Vec3> of[2];
    for (std::int64_t z = 0; z < geometry.size[2]; ++z) {
      for (std::int64_t y = 0; y < geometry.size[1]; ++y) {
        for (std::int64_t x = 0; x < geometry.size[0]; ++x) {
          const int l = label(x, y, z);
          if (l == a || l == b)
            of[l == b].push_back({static_cast<double>(x) * geometry.spacing_mm[0],
                                  static_cast<double>(y) * geometry.spacing_mm[1],
                                  static_cast<double>(z) * geometry.spacing_mm[2]});
        }
      }
    }
    for (const Vec3& p : of[0]) {
      for (const Vec3& q : of[1]) least = std::min(least, voxel_gap_mm(p - q, geometry.spacing_mm));
    }
    return least;
  }
};

inline bool any(int) { return true; }
inline bool everywhere(const Index&) { return true; }

inline double u_of(const RequirementResult& r, const std::string& name) {
  for (const Contribution& c : r.measured.contributions) {
    if (c.name == name) return c.standard_uncertainty;
  }
  return -1;
}

inline Scene some_pores() {
  return Scene({{{8, 8, 8}, {14, 14, 14}},                           // 1: 216 voxels
                {{20, 8, 8}, {24, 12, 12}},                          // 2: 64
                {{30, 4, 20}, {34, 8, 23}, PoreKind::open},          // 3: 48, at a face
                {{20, 20, 20}, {23, 23, 24}},                        // 4: 36
                {{36, 30, 28}, {40, 34, 31}, PoreKind::inclusion},   // 5: 48
                {{10, 30, 10}, {14, 34, 14}, PoreKind::in_between},  // 6: 64
                {{30, 20, 8}, {38, 26, 12}, PoreKind::diffuse},      // 7: 192
                {{12, 20, 24}, {14, 22, 26}}});                      // 8: 8
}

inline bool is_counted_void(int id) { return id != 5 && id != 6; }

}  // namespace halfmark::tests
