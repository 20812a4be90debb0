// Every measured quantity against a plain computation on a part made by hand: a block of voxels with a few
// pores of known places, kinds and voxels.
#include <algorithm>
#include <cmath>
#include <functional>
#include <numbers>
#include <string>
#include <vector>

#include "analysis/requirement_measures.h"
#include "analysis/run_grid.h"
#include "analysis/surface.h"
#include "analysis/verdict.h"
#include "tests/support/catch.h"
#include "tests/support/label_runs.h"
#include "tests/support/phantoms.h"

using namespace halfmark;
using namespace halfmark::tests;
using Index = std::array<std::int64_t, 3>;

namespace {

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

bool any(int) { return true; }
bool everywhere(const Index&) { return true; }

double u_of(const RequirementResult& r, const std::string& name) {
  for (const Contribution& c : r.measured.contributions) {
    if (c.name == name) return c.standard_uncertainty;
  }
  return -1;
}

Scene some_pores() {
  return Scene({{{8, 8, 8}, {14, 14, 14}},                           // 1: 216 voxels
                {{20, 8, 8}, {24, 12, 12}},                          // 2: 64
                {{30, 4, 20}, {34, 8, 23}, PoreKind::open},          // 3: 48, at a face
                {{20, 20, 20}, {23, 23, 24}},                        // 4: 36
                {{36, 30, 28}, {40, 34, 31}, PoreKind::inclusion},   // 5: 48
                {{10, 30, 10}, {14, 34, 14}, PoreKind::in_between},  // 6: 64
                {{30, 20, 8}, {38, 26, 12}, PoreKind::diffuse},      // 7: 192
                {{12, 20, 24}, {14, 22, 26}}});                      // 8: 8
}

bool is_counted_void(int id) { return id != 5 && id != 6; }

}  // namespace

TEST_CASE("porosity is pore volume over pore and material volume, clipped at the zone") {
  Scene scene = some_pores();
  const RequirementResult whole = scene.measure(Quantity::porosity);
  CHECK(whole.measured.value == Approx(scene.count(everywhere, is_counted_void).percent()));
  CHECK(whole.evidence.pore_id == 1);
  CHECK(whole.unit == "%");

  // A zone that cuts pores 1 and 2; their halves count although a centre may lie outside.
  const Index low{11, 6, 6}, high{23, 20, 30};
  scene.add_box("cut", low, high);
  const auto in_zone = [&](const Index& i) {
    return i[0] >= low[0] && i[0] < high[0] && i[1] >= low[1] && i[1] < high[1] && i[2] >= low[2] &&
           i[2] < high[2];
  };
  const auto cut = scene.count(in_zone, is_counted_void);
  CHECK(cut.pore == 3 * 36 + 3 * 16);
  CHECK(scene.measure(Quantity::porosity, "cut").measured.value == Approx(cut.percent()));

  // Noise in squares, what errs alike in all pores in full.
  const double scale = 100 / static_cast<double>(scene.count(everywhere, any).part);
  const double voids[] = {216, 64, 48, 36, 192, 8};
  double squares = 0, sum = 0;
  for (const double v : voids) squares += v * v, sum += v;
  CHECK(u_of(whole, "noise") == Approx(0.03 * std::sqrt(squares) * scale));
  CHECK(u_of(whole, "local level") == Approx(0.02 * std::sqrt(squares) * scale));
  CHECK(u_of(whole, "threshold") == Approx(0.01 * sum * scale));
  CHECK(u_of(whole, "edge position") == Approx(0.005 * sum * scale));
}

TEST_CASE("porosity without excluded places, excluded pores and small pores") {
  Scene scene = some_pores();
  Requirement r = Scene::requirement(Quantity::porosity);
  r.ignore_below_mm = scene.pore(4).equivalent_diameter_mm + 1e-9;
  CHECK(scene.measure(r).measured.value ==
        Approx(
            scene.count(everywhere, [](int l) { return is_counted_void(l) && l != 4 && l != 8; }).percent()));
  // Pore 4 may count or not: half its volume.
  CHECK(u_of(scene.measure(r), "pores near the size limit") ==
        Approx(0.5 * 36 * 100 / static_cast<double>(scene.count(everywhere, any).part)));

  scene.pore(2).disposition = "a bore (by)";
  scene.add_box("insert", {6, 6, 6}, {12, 16, 16}, ZoneUse::exclude);  // holds the centre of pore 1
  const auto outside = [](const Index& i) {
    return !(i[0] >= 6 && i[0] < 12 && i[1] >= 6 && i[1] < 16 && i[2] >= 6 && i[2] < 16);
  };
  CHECK(scene.measure(Quantity::porosity).measured.value ==
        Approx(scene.count(outside, [](int l) { return is_counted_void(l) && l > 2; }).percent()));
}

TEST_CASE("open porosity counts surface-connected pores only") {
  Scene scene = some_pores();
  const RequirementResult r = scene.measure(Quantity::open_porosity);
  CHECK(r.measured.value == Approx(scene.count(everywhere, [](int l) { return l == 3; }).percent()));
  CHECK(r.evidence.pore_id == 3);
}

TEST_CASE("section porosity is that of the worst plane") {
  Scene scene = some_pores();
  for (int axis = 0; axis < 4; ++axis) {
    Requirement r = Scene::requirement(Quantity::section_porosity);
    if (axis < 3) r.axis = axis;
    double worst = 0;
    for (int a = 0; a < 3; ++a) {
      if (axis < 3 && a != axis) continue;
      const auto n = static_cast<std::size_t>(a);
      for (std::int64_t k = scene.block_low[n]; k < scene.block_high[n]; ++k)
        worst = std::max(worst,
                         scene.count([&](const Index& i) { return i[n] == k; }, is_counted_void).percent());
    }
    const RequirementResult found = scene.measure(r);
    CAPTURE(axis, found.evidence.what);
    CHECK(found.measured.value == Approx(worst));
    CHECK(found.measured.standard_uncertainty > 0.01 * worst);
  }
}

TEST_CASE("a window in a section lies wholly in the volume and is at least 80 % part") {
  Scene scene = some_pores();
  scene.add_box("right", {18, 0, 0}, {48, 44, 40});
  for (const std::int64_t edge : {5, 9, 17}) {
    for (const char* zone : {"part", "right"}) {
      Requirement r = Scene::requirement(Quantity::section_porosity, zone);
      r.axis = 2;
      r.window_mm = static_cast<double>(edge) * 0.1;
      const std::int64_t first = std::string(zone) == "right" ? 18 : 0;
      double worst = 0;
      for (std::int64_t z = 4; z < 36; ++z) {
        for (std::int64_t y = 0; y + edge <= 44; ++y) {
          for (std::int64_t x = 0; x + edge <= 48; ++x) {
            std::int64_t pore = 0, part = 0;
            for (std::int64_t j = y; j < y + edge; ++j) {
              for (std::int64_t i = std::max(x, first); i < x + edge; ++i) {
                const int l = scene.label(i, j, z);
                pore += l != 0 && is_counted_void(l);
                part += scene.in_block(i, j, z);
              }
            }
            if (5 * part >= 4 * edge * edge)
              worst = std::max(worst, 100.0 * static_cast<double>(pore) / static_cast<double>(part));
          }
        }
      }
      const RequirementResult found = scene.measure(r);
      CAPTURE(edge, zone, found.evidence.what);
      CHECK(found.measured.value == Approx(worst));
      CHECK(found.evidence.extent_mm == Approx(*r.window_mm));
    }
  }
  Requirement wide = Scene::requirement(Quantity::section_porosity);
  wide.window_mm = 4.6;
  const RequirementResult none = scene.measure(wide);
  CHECK_FALSE(none.has_value);
  CHECK_FALSE(none.met_without_value);
  CHECK(none.reason.find("80 %") != std::string::npos);
}

TEST_CASE("local porosity is that of the worst place of a cube or a sphere") {
  Scene scene = some_pores();
  for (const bool sphere : {false, true}) {
    Requirement r = Scene::requirement(Quantity::local_porosity);
    r.reference = ReferenceBody{sphere, 0.9};
    std::vector<Index> body;
    for (std::int64_t z = -4; z <= 4; ++z) {
      for (std::int64_t y = -4; y <= 4; ++y) {
        for (std::int64_t x = -4; x <= 4; ++x) {
          if (!sphere || x * x + y * y + z * z <= 4.5 * 4.5) body.push_back({x, y, z});
        }
      }
    }
    std::vector<int> label;
    for (std::int64_t z = 0; z < 40; ++z) {
      for (std::int64_t y = 0; y < 44; ++y) {
        for (std::int64_t x = 0; x < 48; ++x) label.push_back(scene.label(x, y, z));
      }
    }
    double worst = 0;
    Index at{};
    for (std::int64_t z = 4; z < 36; ++z) {
      for (std::int64_t y = 4; y < 40; ++y) {
        for (std::int64_t x = 4; x < 44; ++x) {
          std::int64_t pore = 0, part = 0;
          for (const Index& o : body) {
            const int l = label[static_cast<std::size_t>(((z + o[2]) * 44 + y + o[1]) * 48 + x + o[0])];
            pore += l != 0 && is_counted_void(l);
            part += scene.in_block(x + o[0], y + o[1], z + o[2]);
          }
          if (5 * part < 4 * static_cast<std::int64_t>(body.size())) continue;
          const double value = 100.0 * static_cast<double>(pore) / static_cast<double>(part);
          if (value > worst) worst = value, at = {x, y, z};
        }
      }
    }
    const RequirementResult found = scene.measure(r);
    const Vec3 place = scene.geometry.index_to_mm(
        {static_cast<double>(at[0]), static_cast<double>(at[1]), static_cast<double>(at[2])});
    CAPTURE(sphere, worst);
    CHECK(found.measured.value == Approx(worst));
    REQUIRE(found.evidence.position_mm.has_value());
    CHECK(length(*found.evidence.position_mm - place) < 1e-9);
    // Of the pores at that place alone: pore 1 fills it.
    CHECK(u_of(found, "threshold") == Approx(0.01 * worst).epsilon(0.01));
    CHECK(u_of(found, "noise") == Approx(0.03 * worst).epsilon(0.01));
  }
  Requirement wide = Scene::requirement(Quantity::local_porosity);
  wide.reference = ReferenceBody{false, 4.0};
  CHECK_FALSE(scene.measure(wide).has_value);
}

TEST_CASE("a body's cells fill it: 33 voxels move by 3, not by 4") {
  Scene scene(std::vector<BoxPore>{{{8, 8, 8}, {14, 14, 14}}});
  Requirement r = Scene::requirement(Quantity::section_porosity);
  r.axis = 2;
  r.window_mm = 3.3;
  double worst = 0;
  for (std::int64_t y = 0; y + 33 <= 44; y += 3) {
    for (std::int64_t x = 0; x + 33 <= 48; x += 3) {
      const auto found = scene.count(
          [&](const Index& i) {
            return i[0] >= x && i[0] < x + 33 && i[1] >= y && i[1] < y + 33 && i[2] == 10;
          },
          any);
      if (5 * found.part >= 4 * 33 * 33) worst = std::max(worst, found.percent());
    }
  }
  CHECK(worst > 0);
  CHECK(scene.measure(r).measured.value == Approx(worst));
}

TEST_CASE("pores are counted by their centres") {
  Scene scene = some_pores();
  CHECK(scene.measure(Quantity::pore_count).measured.value == 5);  // 1, 2, 3, 4, 8
  CHECK(scene.measure(Quantity::pore_count).measured.standard_uncertainty == 0);
  CHECK(scene.measure(Quantity::inclusion_count).measured.value == 1);
  scene.add_box("left", {0, 0, 0}, {12, 44, 40});  // holds the centre of pore 1 only
  const RequirementResult left = scene.measure(Quantity::pore_count, "left");
  CHECK(left.measured.value == 1);
  CHECK(left.evidence.pore_id == 1);
  const RequirementResult density = scene.measure(Quantity::pore_density, "left");
  const double cm3 = 8 * 36 * 32 * 1e-3 / 1000;
  CHECK(density.measured.value == Approx(1 / cm3));
  CHECK(density.unit == "1/cm³");
}

TEST_CASE("pores within U of the size limit make the count's uncertainty") {
  Scene scene = some_pores();
  Requirement r = Scene::requirement(Quantity::pore_count);
  const double d2 = scene.pore(2).equivalent_diameter_mm;
  scene.pore(2).diameter_standard_uncertainty_mm = scene.pore(3).diameter_standard_uncertainty_mm =
      scene.pore(5).diameter_standard_uncertainty_mm = 0.03;
  r.ignore_below_mm = d2 - 0.05;  // 0.446 mm: pores 2 (0.496), 3 and the inclusion 5 (0.451) lie within 0.06
  RequirementResult found = scene.measure(r);
  CHECK(found.measured.value == 3);                           // 1, 2, 3
  CHECK(found.measured.standard_uncertainty == Approx(1.0));  // U = 2 pores
  r.ignore_below_mm = d2 + 0.05;
  found = scene.measure(r);
  CHECK(found.measured.value == 1);
  CHECK(found.measured.standard_uncertainty == Approx(0.5));  // pore 3 is farther
  scene.pore(2).disposition = "a bore";
  CHECK(scene.measure(r).measured.standard_uncertainty == 0);
  r.quantity = Quantity::inclusion_count;
  r.ignore_below_mm = d2 - 0.05;
  CHECK(scene.measure(r).measured.value == 1);
  CHECK(scene.measure(r).measured.standard_uncertainty == Approx(0.5));
}

TEST_CASE("the largest pore, the longest pore, the largest inclusion") {
  Scene scene = some_pores();
  const double pi = std::numbers::pi;
  const RequirementResult diameter = scene.measure(Quantity::pore_diameter);
  CHECK(diameter.measured.value == Approx(std::cbrt(6 * 0.216 / pi)));
  CHECK(diameter.measured.standard_uncertainty == Approx(scene.pore(1).diameter_standard_uncertainty_mm));
  CHECK(diameter.evidence.pore_id == 1);
  CHECK_FALSE(diameter.lower_bound);
  const RequirementResult inclusion = scene.measure(Quantity::inclusion_diameter);
  CHECK(inclusion.measured.value == Approx(std::cbrt(6 * 0.048 / pi)));
  CHECK(inclusion.evidence.pore_id == 5);
  scene.pore(2).length_mm = 0.9;
  const RequirementResult longest = scene.measure(Quantity::pore_length);
  CHECK(longest.measured.value == Approx(0.9));
  CHECK(longest.evidence.pore_id == 2);
  scene.pore(8).cut_by_field = true;
  CHECK(scene.measure(Quantity::pore_diameter).lower_bound);

  // Diffuse regions and in-between grey have no size of their own.
  scene.add_box("cloud", {29, 16, 6}, {40, 30, 16});
  const RequirementResult cloud = scene.measure(Quantity::pore_diameter, "cloud");
  CHECK_FALSE(cloud.has_value);
  CHECK(cloud.met_without_value);
  scene.add_box("no inclusion", {6, 6, 6}, {16, 16, 16});
  scene.spec.pores.inclusions = false;
  CHECK_FALSE(scene.measure(Quantity::inclusion_diameter, "no inclusion").met_without_value);
  scene.spec.pores.inclusions = true;
  CHECK(scene.measure(Quantity::inclusion_diameter, "no inclusion").met_without_value);
}

TEST_CASE("the least depth is that of closed pores") {
  Scene scene = some_pores();
  scene.pore(1).depth_mm = 0.4;
  scene.pore(2).depth_mm = 0.3;
  scene.pore(3).depth_mm = 0;
  scene.pore(5).depth_mm = scene.pore(6).depth_mm = scene.pore(7).depth_mm = 0.1;
  scene.pore(8).depth_mm = not_measured;
  const RequirementResult found = scene.measure(Quantity::pore_depth);
  CHECK(found.measured.value == Approx(0.3));
  CHECK(found.evidence.pore_id == 2);
  for (Pore& p : scene.pores.pores) p.depth_mm = not_measured;
  CHECK(scene.measure(Quantity::pore_depth).met_without_value);
  scene.part.has_outside = false;
  CHECK_FALSE(scene.measure(Quantity::pore_depth).met_without_value);
}

TEST_CASE("the least gap is that of the pores that count, in the zone") {
  Scene scene = some_pores();
  const std::vector<int> ids{1, 2, 3, 4, 8};
  const auto least = [&](const std::vector<int>& of, bool relative, const std::vector<int>& in_zone) {
    double best = 1e9;
    for (const int a : of) {
      for (const int b : of) {
        if (a >= b || (!in_zone.empty() && std::find(in_zone.begin(), in_zone.end(), a) == in_zone.end() &&
                       std::find(in_zone.begin(), in_zone.end(), b) == in_zone.end()))
          continue;
        const double d = std::min(scene.pore(a).equivalent_diameter_mm, scene.pore(b).equivalent_diameter_mm);
        best = std::min(best, scene.gap(a, b) / (relative ? d : 1));
      }
    }
    return best;
  };
  Requirement r = Scene::requirement(Quantity::pore_spacing);
  CHECK(scene.measure(r).measured.value == Approx(least(ids, false, {})));
  r.relative = true;
  CHECK(scene.measure(r).measured.value == Approx(least(ids, true, {})));
  r.relative = false;
  // Without the small ones, whose nearest neighbours they are; none of the neighbours is told beforehand.
  r.ignore_below_mm = 0.45;
  RequirementResult found = scene.measure(r);
  CHECK(found.measured.value == Approx(least({1, 2, 3}, false, {})));
  // The nearest neighbour told is one that does not count.
  scene.pore(1).nearest_id = 8;
  scene.pore(1).spacing_mm = 0.1;
  CHECK(scene.measure(r).measured.value == Approx(found.measured.value));
  scene.pore(1).nearest_id = 2;
  scene.pore(1).spacing_mm = scene.gap(1, 2);
  CHECK(scene.measure(r).measured.value == Approx(found.measured.value));
  CHECK(found.evidence.what == "gap between pores 1 and 2");
  r.ignore_below_mm.reset();
  scene.pore(2).disposition = "a bore";
  CHECK(scene.measure(r).measured.value == Approx(least({1, 3, 4, 8}, false, {})));
  scene.pore(2).disposition.clear();
  // A pore in the zone and its neighbour beyond it.
  scene.add_box("front", {28, 4, 18}, {36, 10, 26});
  r.zone = "front";
  CHECK(scene.measure(r).measured.value == Approx(least(ids, false, {3})));
  r.ignore_below_mm = 0.5;
  found = scene.measure(r);
  CHECK_FALSE(found.has_value);
  CHECK(found.met_without_value);
}

TEST_CASE("a nearer pair may be the better one in relative terms") {
  // 1 and 2 are large and 5 voxels apart; 3 is small and 4 voxels from 1.
  Scene scene({{{8, 8, 8}, {16, 16, 16}}, {{21, 8, 8}, {29, 16, 16}}, {{8, 8, 20}, {10, 10, 22}}});
  scene.pore(1).nearest_id = 3, scene.pore(1).spacing_mm = 0.4;
  scene.pore(2).nearest_id = 1, scene.pore(2).spacing_mm = 0.5;
  scene.pore(3).nearest_id = 1, scene.pore(3).spacing_mm = 0.4;
  Requirement r = Scene::requirement(Quantity::pore_spacing);
  CHECK(scene.measure(r).measured.value == Approx(0.4));
  r.relative = true;
  const RequirementResult found = scene.measure(r);
  CHECK(found.measured.value == Approx(0.5 / scene.pore(2).equivalent_diameter_mm));
  CHECK(found.evidence.what == "gap between pores 1 and 2");
  CHECK(u_of(found, "diameter") > 0);
}

TEST_CASE("a nest is a group linked by gaps below the smaller pore") {
  // Cubes of 4 voxels (0.496 mm) in a row, 3, 4 and 6 voxels apart: the first three make a nest. Far off a
  // pair whose gap, 3 voxels, exceeds the smaller one's 0.248 mm; a diffuse region between links nothing.
  Scene scene({{{6, 8, 8}, {10, 12, 12}},
               {{13, 8, 8}, {17, 12, 12}},
               {{21, 8, 8}, {25, 12, 12}},
               {{31, 8, 8}, {35, 12, 12}},
               {{8, 30, 28}, {12, 34, 32}},
               {{15, 31, 29}, {17, 33, 31}},
               {{25, 8, 8}, {31, 12, 12}, PoreKind::diffuse}});
  RequirementResult nest = scene.measure(Quantity::pore_nest);
  CHECK(nest.measured.value == Approx(1.5 + 0.4));
  CHECK(nest.evidence.pore_id == 1);
  // With links within 0.035 mm of their limit to spare, nothing changes.
  CHECK(u_of(nest, "links near their limit") == 0);
  // A pore whose limit lies at the gap: the nest may reach on to pore 4.
  scene.pore(4).equivalent_diameter_mm = scene.pore(3).equivalent_diameter_mm = 0.59;
  nest = scene.measure(Quantity::pore_nest);
  CHECK(u_of(nest, "links near their limit") == Approx(0.5 * 1.0));
  // A long pore beside a small one: the group is no shorter than its longest member.
  scene.pore(5).length_mm = 3;
  scene.pore(6).equivalent_diameter_mm = 0.4;
  CHECK(scene.measure(Quantity::pore_nest).measured.value == Approx(3.0));
  Requirement r = Scene::requirement(Quantity::pore_nest);
  r.ignore_below_mm = 5;
  CHECK(scene.measure(r).met_without_value);
  scene.add_box("pair", {4, 28, 26}, {14, 36, 34});  // one of the two alone
  CHECK_FALSE(scene.measure(Quantity::pore_nest, "pair").has_value);
}

TEST_CASE("walls: the least patch, a percentile, what is left out") {
  Scene scene(std::vector<BoxPore>{{{8, 8, 8}, {10, 10, 10}}});
  // A flat face of 1 mm cells over the block's lower face, 0.1 mm apart; thickness rises along x.
  const int nx = 36, ny = 32;
  for (int y = 0; y <= ny; ++y) {
    for (int x = 0; x <= nx; ++x) {
      const Vec3 p = scene.geometry.index_to_mm({4.0 + x, 4.0 + y, 4.0});
      scene.surface.vertices_mm.push_back(
          {static_cast<float>(p[0]), static_cast<float>(p[1]), static_cast<float>(p[2])});
      scene.walls.thickness_mm.push_back(static_cast<float>(std::min(1.0 + 0.1 * x, 4.0)));
      scene.walls.is_wall.push_back(1);
      scene.walls.at_cap.push_back(1.0 + 0.1 * x >= 4.0);
    }
  }
  const auto vertex = [&](int x, int y) { return static_cast<std::uint32_t>(y * (nx + 1) + x); };
  for (int y = 0; y < ny; ++y) {
    for (int x = 0; x < nx; ++x) {
      scene.surface.triangles.push_back({vertex(x, y), vertex(x, y + 1), vertex(x + 1, y)});
      scene.surface.triangles.push_back({vertex(x + 1, y), vertex(x, y + 1), vertex(x + 1, y + 1)});
    }
  }
  scene.has_walls = true;
  scene.walls.standard_uncertainty_mm = 0.01;
  scene.spec.walls.max_mm = 4;
  scene.spec.walls.patch_mm2 = 0.25;
  Requirement r = Scene::requirement(Quantity::wall_thickness);
  r.max.reset();
  r.min = 0.5;
  const RequirementResult least = scene.measure(r);
  REQUIRE(least.has_value);
  // A patch of 0.25 mm^2 has a radius of 0.28 mm; at the rim half of it is there.
  const double radius = std::sqrt(0.25 / std::numbers::pi);
  CAPTURE(least.measured.value, radius);
  CHECK(least.measured.value >= 1.0);
  CHECK(least.measured.value <= 1.0 + radius + 0.1);
  REQUIRE(least.evidence.position_mm.has_value());
  CHECK((*least.evidence.position_mm)[0] < scene.geometry.origin_mm[0] + 0.4 + 2 * radius);
  r.percentile = 50;
  CHECK(scene.measure(r).measured.value == Approx(1.0 + 0.1 * nx / 2).margin(0.101));
  // A tenth of the area lies below x = 3.6.
  r.percentile = 10;
  CHECK(scene.measure(r).measured.value == Approx(1.0 + 0.1 * nx / 10).margin(0.101));
  r.percentile.reset();
  // Exclude the thin end: the whole part's least wall is then elsewhere.
  scene.add_box("clamp", {0, 0, 0}, {14, 44, 40}, ZoneUse::exclude);
  const RequirementResult rest = scene.measure(r);
  CHECK(rest.measured.value >= 2.0 - 0.05);
  CHECK(rest.measured.value <= 2.0 + radius + 0.15);
  scene.add_box("thick", {37, 0, 0}, {48, 44, 40});
  r.zone = "thick";
  const RequirementResult capped = scene.measure(r);
  CHECK(capped.measured.value == Approx(4).margin(1e-5));
  CHECK(capped.lower_bound);
  r.min.reset();
  r.max = 6;
  RequirementResult unproved = scene.measure(r);
  judge(unproved, {});
  CHECK(unproved.verdict == Verdict::undecided);
  CHECK(unproved.reason.find("walls are measured up to") != std::string::npos);
}

TEST_CASE("material volume and surface area of the part and of a zone") {
  Scene scene = some_pores();
  // The block's surface; pores are not in it, so that the two ways to a volume can be told apart.
  const auto at = [&](const Index& i) {
    return scene.geometry.index_to_mm(
        {static_cast<double>(i[0]) - 0.5, static_cast<double>(i[1]) - 0.5, static_cast<double>(i[2]) - 0.5});
  };
  const Vec3 low = at(scene.block_low), high = at(scene.block_high);
  for (int c = 0; c < 8; ++c)
    scene.surface.vertices_mm.push_back({static_cast<float>((c & 1) != 0 ? high[0] : low[0]),
                                         static_cast<float>((c & 2) != 0 ? high[1] : low[1]),
                                         static_cast<float>((c & 4) != 0 ? high[2] : low[2])});
  scene.surface.triangles = {{0, 2, 1}, {1, 2, 3}, {4, 5, 6}, {5, 7, 6}, {0, 1, 4}, {1, 5, 4},
                             {2, 6, 3}, {3, 6, 7}, {0, 4, 2}, {2, 4, 6}, {1, 3, 5}, {3, 7, 5}};
  const double block = 4.0 * 3.6 * 3.2, area = 2 * (4.0 * 3.6 + 3.6 * 3.2 + 3.2 * 4.0);
  REQUIRE(enclosed_volume_mm3(scene.surface) == Approx(block));
  CHECK(scene.measure(Quantity::material_volume).measured.value == Approx(block));
  CHECK(scene.measure(Quantity::surface_area).measured.value == Approx(area));
  // A threshold that is u off moves a Gaussian edge by u / contrast * width * sqrt(2 pi).
  const double shift = 0.002 * 0.1 * std::sqrt(1 + 1.0 / 12) * std::sqrt(2 * std::numbers::pi);
  CHECK(u_of(scene.measure(Quantity::material_volume), "threshold") == Approx(area * shift));

  // In a zone all voids are taken off, also pores below a size limit and those an inspector excluded.
  const Index from{0, 0, 0}, to{24, 44, 18};
  scene.add_box("corner", from, to);
  scene.pore(1).disposition = "a bore";
  const auto found =
      scene.count([&](const Index& i) { return i[0] < to[0] && i[2] < to[2]; }, is_counted_void);
  CHECK(scene.measure(Quantity::material_volume, "corner").measured.value ==
        Approx(static_cast<double>(found.part - found.pore) * 1e-3));
  // Triangles whose middles lie in the zone: of the lower and left faces.
  double in_corner = 0;
  const ZoneSpec& corner = scene.spec.zones.back();
  for (const auto& t : scene.surface.triangles) {
    Vec3 p[3], middle{};
    for (std::size_t i = 0; i < 3; ++i) {
      const auto& v = scene.surface.vertices_mm[t[i]];
      p[i] = {v[0], v[1], v[2]};
      middle = middle + (1.0 / 3) * p[i];
    }
    bool in = true;
    for (std::size_t a = 0; a < 3; ++a)
      in = in && middle[a] >= corner.min_mm[a] && middle[a] <= corner.max_mm[a];
    if (in) in_corner += 0.5 * length(cross(p[1] - p[0], p[2] - p[0]));
  }
  CHECK(in_corner > 0);
  CHECK(scene.measure(Quantity::surface_area, "corner").measured.value == Approx(in_corner));
  // What is excluded is taken off the whole part too.
  scene.add_box("insert", {20, 0, 0}, {48, 44, 40}, ZoneUse::exclude);
  const auto rest = scene.count([](const Index& i) { return i[0] < 20; }, is_counted_void);
  CHECK(scene.measure(Quantity::material_volume).measured.value ==
        Approx(static_cast<double>(rest.part - rest.pore) * 1e-3));
  CHECK(scene.measure(Quantity::surface_area).measured.value < 0.7 * area);
}

TEST_CASE("a zone without part proves nothing") {
  Scene scene = some_pores();
  scene.add_box("air", {45, 0, 0}, {48, 44, 40});
  for (const Quantity q :
       {Quantity::porosity, Quantity::open_porosity, Quantity::pore_count, Quantity::pore_density,
        Quantity::pore_diameter, Quantity::pore_length, Quantity::pore_spacing, Quantity::pore_nest,
        Quantity::pore_depth, Quantity::inclusion_count, Quantity::material_volume}) {
    RequirementResult r = scene.measure(q, "air");
    judge(r, {});
    CAPTURE(to_text(q), r.reason);
    CHECK_FALSE(r.has_value);
    CHECK(r.verdict == Verdict::undecided);
    CHECK(r.reason.find("holds no part") != std::string::npos);
  }
}

TEST_CASE("porosity of few pores says what is not in the figure") {
  Scene scene = some_pores();
  const ZoneSet zones(scene.spec, scene.geometry, scene.part);
  assign_zones(scene.pores.pores, zones);
  MeasuredPart measured{scene.geometry, scene.levels, scene.part, scene.pores};
  measured.smallest_expected_diameter_mm = 0.21;
  const auto r = measure_requirement(Scene::requirement(Quantity::porosity), scene.spec, zones, measured);
  REQUIRE(r.warnings.size() >= 1);
  CHECK(r.warnings.front().find("pores below about 0.21 mm cannot be seen") != std::string::npos);
}

TEST_CASE("sums of the pores: kinds, volume, porosity") {
  Scene scene = some_pores();
  scene.add_box("insert", {19, 19, 19}, {25, 25, 25}, ZoneUse::exclude);  // pore 4
  const ZoneSet zones(scene.spec, scene.geometry, scene.part);
  assign_zones(scene.pores.pores, zones);
  const MeasuredPart measured{scene.geometry, scene.levels, scene.part, scene.pores};
  const PoreSummary sum = summarise_pores(measured, zones);
  CHECK(sum.count == 5);
  CHECK(sum.closed == 3);
  CHECK(sum.open == 1);
  CHECK(sum.diffuse == 1);
  CHECK(sum.inclusions == 1);
  CHECK(sum.in_between == 1);
  CHECK(sum.volume_mm3.value == Approx((216 + 64 + 48 + 192 + 8) * 1e-3));
  const double part = 40 * 36 * 32 * 1e-3;
  CHECK(sum.porosity_percent.value == Approx(100 * 0.528 / part));
  CHECK(sum.open_porosity_percent == Approx(100 * 0.048 / part));
  // The same parts as the porosity of the whole part: squares of noise and level, the rest in full.
  const double squares = 216 * 216 + 64 * 64 + 48 * 48 + 192 * 192 + 8 * 8;
  const double u =
      std::sqrt((9e-4 + 4e-4) * squares + std::pow(0.01 * 528, 2) + std::pow(0.005 * 528, 2)) * 1e-3;
  CHECK(sum.volume_mm3.standard_uncertainty == Approx(u));
}
