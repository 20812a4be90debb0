// Porosities, sizes, numbers and gaps of pores against a plain computation on a part made by hand.
#include "tests/support/catch.h"
#include "tests/support/requirement_scene.h"

using namespace halfmark;
using namespace halfmark::tests;

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
  // Not searched for is not the same as none.
  CHECK_FALSE(scene.measure(Quantity::inclusion_count).has_value);
  CHECK_FALSE(scene.measure(Quantity::inclusion_count).met_without_value);
  scene.spec.pores.inclusions = true;
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
  scene.spec.pores.inclusions = true;
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
