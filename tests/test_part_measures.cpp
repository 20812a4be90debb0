// Walls, material volume and surface area of a zone against a plain computation on a part made by hand.
#include "tests/support/catch.h"
#include "tests/support/requirement_scene.h"

using namespace halfmark;
using namespace halfmark::tests;

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
