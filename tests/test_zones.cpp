// Zones on the voxels of a turned, shifted volume of oblong voxels: against a plain question per voxel,
// against the volumes of the solids, and the sums over them.

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <functional>
#include <numbers>
#include <string>
#include <vector>

#include "analysis/blurred_body.h"
#include "analysis/requirement_measures.h"
#include "analysis/surface.h"
#include "analysis/zone_sums.h"
#include "analysis/zones.h"
#include "io/mesh_file.h"
#include "tests/support/catch.h"
#include "tests/support/label_runs.h"
#include "tests/support/phantoms.h"
#include "tests/support/temporary_folder.h"

using namespace halfmark;
using namespace halfmark::tests;
using std::numbers::pi;

namespace {

VolumeGeometry turned_geometry() {
  VolumeGeometry g;
  g.size = {56, 50, 48};
  g.spacing_mm = {0.2, 0.22, 0.25};
  g.origin_mm = {-3.1, 12.4, 7.7};
  g.direction = rotation_about({1, 2, -1}, 25);
  return g;
}

Vec3 middle_of(const VolumeGeometry& g) {
  return g.index_to_mm({0.5 * static_cast<double>(g.size[0] - 1), 0.5 * static_cast<double>(g.size[1] - 1),
                        0.5 * static_cast<double>(g.size[2] - 1)});
}

ZoneSpec box_zone(const std::string& id, const Vec3& low, const Vec3& high) {
  ZoneSpec zone;
  zone.id = id;
  zone.shape = ZoneShape::box;
  zone.min_mm = low;
  zone.max_mm = high;
  return zone;
}
ZoneSpec sphere_zone(const std::string& id, const Vec3& centre, double radius) {
  ZoneSpec zone;
  zone.id = id;
  zone.shape = ZoneShape::sphere;
  zone.centre_mm = centre;
  zone.radius_mm = radius;
  return zone;
}
ZoneSpec cylinder_zone(const std::string& id, const Vec3& from, const Vec3& to, double radius) {
  ZoneSpec zone;
  zone.id = id;
  zone.shape = ZoneShape::cylinder;
  zone.from_mm = from;
  zone.to_mm = to;
  zone.radius_mm = radius;
  return zone;
}
ZoneSpec set_zone(const std::string& id, ZoneShape shape, std::vector<std::string> of) {
  ZoneSpec zone;
  zone.id = id;
  zone.shape = shape;
  zone.of = std::move(of);
  return zone;
}

// A ball about the volume's middle as the part.
constexpr double ball_radius_mm = 4.4;
PartMap ball_part(const VolumeGeometry& g) {
  PartMap part;
  const Vec3 centre = middle_of(g);
  part.inside = mask_of(g.size, [&](auto x, auto y, auto z) {
    const Vec3 p = g.index_to_mm({static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)});
    return length(p - centre) <= ball_radius_mm;
  });
  return part;
}

ZoneSet zones_of(std::vector<ZoneSpec> zones, const VolumeGeometry& g, const PartMap& part) {
  InspectionSpec spec;
  spec.zones = std::move(zones);
  return ZoneSet(spec, g, part);
}

// How many voxels the rows of a zone differ from `inside`, and of how many.
struct Comparison {
  std::int64_t voxels = 0, wrong_rows = 0, wrong_points = 0;
};
Comparison compare(const ZoneSet& zones, std::size_t zone, const VolumeGeometry& g,
                   const std::function<bool(const Vec3&)>& inside) {
  Comparison out;
  std::vector<Run> runs;
  for (std::int64_t z = 0; z < g.size[2]; ++z) {
    for (std::int64_t y = 0; y < g.size[1]; ++y) {
      zones.row_intervals(zone, y, z, runs);
      for (std::int64_t x = 0; x < g.size[0]; ++x) {
        const Vec3 mm =
            g.index_to_mm({static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)});
        const bool in_row =
            std::any_of(runs.begin(), runs.end(), [&](const Run& r) { return r.begin <= x && x < r.end; });
        out.voxels += in_row;
        out.wrong_rows += in_row != inside(mm);
        out.wrong_points += (zones.contains(zone, mm) && !zones.left_out(mm)) != inside(mm);
      }
      for (std::size_t i = 1; i < runs.size(); ++i) CHECK(runs[i - 1].end < runs[i].begin);
    }
  }
  return out;
}

// A volume by counting voxel centres: each voxel that the surface cuts is in or out, an error of 1/sqrt(12)
// voxel apiece; four standard deviations.
double count_tolerance_mm3(double area_mm2, const VolumeGeometry& g) {
  const double face = g.voxel_mm() * g.voxel_mm();
  return 4 * std::sqrt(area_mm2 / face / 12) * g.voxel_volume_mm3();
}

// A ball of triangles: an octahedron whose edges are halved `times` times, corners on the sphere.
TriangleMesh ball_mesh(const Vec3& centre, double radius, int times) {
  std::vector<std::array<Vec3, 3>> faces;
  for (const double sx : {1.0, -1.0}) {
    for (const double sy : {1.0, -1.0}) {
      for (const double sz : {1.0, -1.0}) {
        const Vec3 a{sx, 0, 0}, b{0, sy, 0}, c{0, 0, sz};
        faces.push_back(sx * sy * sz > 0 ? std::array<Vec3, 3>{a, b, c} : std::array<Vec3, 3>{a, c, b});
      }
    }
  }
  const auto half = [](const Vec3& a, const Vec3& b) { return (1 / length(a + b)) * (a + b); };
  for (int i = 0; i < times; ++i) {
    std::vector<std::array<Vec3, 3>> finer;
    for (const auto& [a, b, c] : faces) {
      const Vec3 ab = half(a, b), bc = half(b, c), ca = half(c, a);
      finer.insert(finer.end(), {{a, ab, ca}, {ab, b, bc}, {ca, bc, c}, {ab, bc, ca}});
    }
    faces = finer;
  }
  TriangleMesh mesh;
  for (const auto& face : faces) {
    const auto first = static_cast<std::uint32_t>(mesh.vertices_mm.size());
    for (const Vec3& corner : face) {
      const Vec3 p = centre + radius * corner;
      mesh.vertices_mm.push_back(
          {static_cast<float>(p[0]), static_cast<float>(p[1]), static_cast<float>(p[2])});
    }
    mesh.triangles.push_back({first, first + 1, first + 2});
  }
  return mesh;
}

// Inside a closed mesh if its triangles fill the whole solid angle (van Oosterom & Strackee 1983).
bool inside_mesh(const TriangleMesh& mesh, const Vec3& p) {
  double angle = 0;
  for (const auto& t : mesh.triangles) {
    Vec3 r[3];
    for (std::size_t i = 0; i < 3; ++i) {
      const auto& v = mesh.vertices_mm[t[i]];
      r[i] = Vec3{v[0], v[1], v[2]} - p;
    }
    const double a = length(r[0]), b = length(r[1]), c = length(r[2]);
    angle += 2 * std::atan2(dot(r[0], cross(r[1], r[2])),
                            a * b * c + dot(r[0], r[1]) * c + dot(r[0], r[2]) * b + dot(r[1], r[2]) * a);
  }
  return std::abs(angle) > 2 * pi;
}

std::string sentence_of(const std::function<void()>& action) {
  try {
    action();
  } catch (const Problem& problem) {
    CHECK(problem.status() == ExitStatus::bad_data);
    return problem.what();
  }
  return "no problem";
}

bool holds(const std::string& text, const std::string& part) { return text.find(part) != std::string::npos; }

}  // namespace

TEST_CASE("zones of plain shapes hold the voxels whose centres lie in them") {
  const VolumeGeometry g = turned_geometry();
  const PartMap part = ball_part(g);
  const Vec3 m = middle_of(g);
  const Vec3 low = m - Vec3{2.1, 1.7, 2.6}, high = m + Vec3{1.4, 2.3, 1.9};
  const Vec3 from = m - Vec3{1.5, 2, 0.7}, to = m + Vec3{1.2, 1.9, 2.1};
  const double span = length(to - from);
  ZoneSpec all;
  all.id = "all";
  const ZoneSet zones = zones_of({all, box_zone("box", low, high), cylinder_zone("cylinder", from, to, 1.3),
                                  sphere_zone("sphere", m + Vec3{0.4, -0.3, 0.2}, 2.7)},
                                 g, part);
  const auto in_box = [&](const Vec3& p) {
    bool in = true;
    for (std::size_t a = 0; a < 3; ++a) in = in && p[a] >= low[a] && p[a] <= high[a];
    return in;
  };
  const auto in_cylinder = [&](const Vec3& p) {
    const Vec3 axis = (1 / span) * (to - from), q = p - from;
    return dot(q, axis) >= 0 && dot(q, axis) <= span && length(cross(q, axis)) <= 1.3;
  };
  const auto in_sphere = [&](const Vec3& p) { return length(p - (m + Vec3{0.4, -0.3, 0.2})) <= 2.7; };
  const Vec3 edge = high - low;
  struct Case {
    const char* id;
    std::function<bool(const Vec3&)> inside;
    double volume_mm3, area_mm2;
  };
  const std::vector<Case> cases{{"all", [](const Vec3&) { return true; },
                                 g.voxel_volume_mm3() * static_cast<double>(g.voxel_count()), 0},
                                {"box", in_box, edge[0] * edge[1] * edge[2],
                                 2 * (edge[0] * edge[1] + edge[1] * edge[2] + edge[2] * edge[0])},
                                {"cylinder", in_cylinder, pi * 1.3 * 1.3 * span, 2 * pi * 1.3 * (1.3 + span)},
                                {"sphere", in_sphere, 4 * pi / 3 * std::pow(2.7, 3), 4 * pi * 2.7 * 2.7}};
  for (const Case& c : cases) {
    const Comparison found = compare(zones, zones.index_of(c.id), g, c.inside);
    const double volume = static_cast<double>(found.voxels) * g.voxel_volume_mm3(),
                 difference = volume - c.volume_mm3, tolerance = count_tolerance_mm3(c.area_mm2, g);
    CAPTURE(c.id, volume, c.volume_mm3, difference, tolerance);
    CHECK(found.wrong_rows == 0);
    CHECK(found.wrong_points == 0);
    CHECK(std::abs(difference) <= tolerance + 1e-9);
  }
}

TEST_CASE("unions and differences of zones, also of each other") {
  const VolumeGeometry g = turned_geometry();
  const PartMap part = ball_part(g);
  const Vec3 m = middle_of(g);
  const auto in_a = [&](const Vec3& p) { return length(p - m) <= 2; };
  const auto in_b = [&](const Vec3& p) { return length(p - (m + Vec3{1.5, 0.2, 0})) <= 1.6; };
  const auto in_c = [&](const Vec3& p) { return length(p - (m + Vec3{0.3, 0.2, 0.1})) <= 1; };
  const ZoneSet zones = zones_of(
      {sphere_zone("a", m, 2), sphere_zone("b", m + Vec3{1.5, 0.2, 0}, 1.6),
       sphere_zone("c", m + Vec3{0.3, 0.2, 0.1}, 1), set_zone("both", ZoneShape::union_of, {"a", "b"}),
       set_zone("hollow", ZoneShape::difference, {"both", "c"}),
       set_zone("rest", ZoneShape::difference, {"a", "b", "c"})},
      g, part);
  const Comparison both =
      compare(zones, zones.index_of("both"), g, [&](const Vec3& p) { return in_a(p) || in_b(p); });
  CHECK(both.wrong_rows == 0);
  CHECK(both.wrong_points == 0);
  const Comparison hollow = compare(zones, zones.index_of("hollow"), g,
                                    [&](const Vec3& p) { return (in_a(p) || in_b(p)) && !in_c(p); });
  CHECK(hollow.wrong_rows == 0);
  CHECK(hollow.wrong_points == 0);
  const Comparison rest = compare(zones, zones.index_of("rest"), g,
                                  [&](const Vec3& p) { return in_a(p) && !in_b(p) && !in_c(p); });
  CHECK(rest.wrong_rows == 0);
  CHECK(rest.wrong_points == 0);
  CHECK(rest.voxels > 0);
}

TEST_CASE("excluded zones and expected voids are taken out of every other zone") {
  const VolumeGeometry g = turned_geometry();
  const PartMap part = ball_part(g);
  const Vec3 m = middle_of(g);
  ZoneSpec all, insert = sphere_zone("insert", m + Vec3{1, 0, 0}, 1.5),
                core = box_zone("core", m - Vec3{2, 2, 2}, m - Vec3{0.5, 0.5, 0.5});
  all.id = "all";
  insert.use = ZoneUse::exclude;
  core.use = ZoneUse::expected_void;
  const ZoneSet zones = zones_of({all, insert, core, sphere_zone("middle", m, 3)}, g, part);
  const auto left_out = [&](const Vec3& p) {
    const Vec3 q = p - m;
    bool in_core = true;
    for (const double v : q) in_core = in_core && v >= -2 && v <= -0.5;
    return in_core || length(q - Vec3{1, 0, 0}) <= 1.5;
  };
  for (const char* id : {"all", "middle"}) {
    const bool whole = std::string(id) == "all";
    const Comparison found = compare(zones, zones.index_of(id), g, [&](const Vec3& p) {
      return (whole || length(p - m) <= 3) && !left_out(p);
    });
    CAPTURE(id);
    CHECK(found.wrong_rows == 0);
    CHECK(found.wrong_points == 0);
  }
  std::vector<Pore> pores(3);
  pores[0].centre_mm = m + Vec3{1.2, 0.3, 0};
  pores[1].centre_mm = m - Vec3{1, 1, 1};
  pores[2].centre_mm = m + Vec3{-1, 1, 0.5};
  assign_zones(pores, zones);
  CHECK(pores[0].left_out);
  CHECK(pores[1].left_out);
  CHECK_FALSE(pores[2].left_out);
  CHECK(pores[2].zones == std::vector<std::string>{"all", "middle"});
}

TEST_CASE("a skin is a range of depths below the part's surface") {
  const VolumeGeometry g = turned_geometry();
  const PartMap part = ball_part(g);
  ZoneSpec skin;
  skin.id = "skin";
  skin.shape = ZoneShape::skin;
  skin.depth_mm = 0.8;
  ZoneSpec second = skin;
  second.id = "second";
  second.from_depth_mm = 0.8;
  second.depth_mm = 1.7;
  const ZoneSet zones = zones_of({skin, second}, g, part);

  // The depth of each voxel by brute force: to the nearest voxel outside that has an inside neighbour.
  std::vector<Vec3> border;
  for (std::int64_t z = 0; z < g.size[2]; ++z) {
    for (std::int64_t y = 0; y < g.size[1]; ++y) {
      for (std::int64_t x = 0; x < g.size[0]; ++x) {
        if (contains(part.inside, x, y, z)) continue;
        const bool beside = contains(part.inside, x - 1, y, z) || contains(part.inside, x + 1, y, z) ||
                            contains(part.inside, x, y - 1, z) || contains(part.inside, x, y + 1, z) ||
                            contains(part.inside, x, y, z - 1) || contains(part.inside, x, y, z + 1);
        if (beside)
          border.push_back(
              g.index_to_mm({static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)}));
      }
    }
  }
  const auto depth = [&](const Vec3& p) {
    double least = 1e9;
    for (const Vec3& b : border) {
      const Vec3 d = p - b;
      least = std::min(least, dot(d, d));
    }
    return std::sqrt(least) - 0.5 * g.voxel_mm();
  };
  std::int64_t wrong = 0, looked = 0;
  double volume[2] = {0, 0};
  std::vector<Run> runs;
  for (std::int64_t z = 0; z < g.size[2]; ++z) {
    for (std::int64_t y = 0; y < g.size[1]; ++y) {
      for (std::size_t i = 0; i < 2; ++i) {
        zones.row_intervals(i, y, z, runs);
        for (const Run& r : runs) volume[i] += (r.end - r.begin) * g.voxel_volume_mm3();
      }
      for (const Run& run : part.inside.row(y, z)) {
        for (std::int64_t x = run.begin; x < run.end; x += 3) {  // brute force is slow
          const Vec3 mm =
              g.index_to_mm({static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)});
          const double d = depth(mm);
          if (std::abs(d - 0.8) < 1e-6 || std::abs(d - 1.7) < 1e-6) continue;
          ++looked;
          wrong += zones.contains(0, mm) != (d <= 0.8);
          wrong += zones.contains(1, mm) != (d > 0.8 && d <= 1.7);
        }
      }
    }
  }
  CAPTURE(looked);
  CHECK(looked > 5000);
  CHECK(wrong == 0);
  const auto ball = [](double r) { return 4 * pi / 3 * r * r * r; };
  const double expected[2] = {ball(ball_radius_mm) - ball(ball_radius_mm - 0.8),
                              ball(ball_radius_mm - 0.8) - ball(ball_radius_mm - 1.7)};
  for (std::size_t i = 0; i < 2; ++i) {
    // The depth counts from the nearest voxel centre outside less half a voxel; beside a slanting or curved
    // face a centre may lie on the face itself: up to half a voxel, 0.29 of the middle area the most seen.
    const double area = 4 * pi * std::pow(ball_radius_mm - 0.8, 2);
    const double tolerance = 0.35 * g.voxel_mm() * area + 2 * count_tolerance_mm3(area, g);
    const double difference = volume[i] - expected[i], in_voxels = difference / area / g.voxel_mm();
    CAPTURE(i, volume[i], expected[i], difference, in_voxels, tolerance);
    CHECK(std::abs(difference) < tolerance);
  }
}

TEST_CASE("a mesh zone holds what lies inside the closed mesh") {
  const VolumeGeometry g = turned_geometry();
  const PartMap part = ball_part(g);
  const Vec3 centre = middle_of(g) + Vec3{1.1, -0.6, 0.3};
  const TriangleMesh mesh = ball_mesh(centre, 2.9, 2);
  const TemporaryFolder folder;
  const std::filesystem::path file = folder / "zone.stl";
  write_stl(mesh, file);
  ZoneSpec zone;
  zone.id = "mesh";
  zone.shape = ZoneShape::mesh;
  zone.file = file;
  const ZoneSet zones = zones_of({zone}, g, part);
  const Comparison found = compare(zones, 0, g, [&](const Vec3& p) { return inside_mesh(mesh, p); });
  const double volume = static_cast<double>(found.voxels) * g.voxel_volume_mm3(),
               expected = enclosed_volume_mm3(mesh), difference = volume - expected,
               tolerance = count_tolerance_mm3(surface_area_mm2(mesh), g);
  CAPTURE(volume, expected, difference, tolerance);
  CHECK(found.wrong_rows == 0);
  CHECK(found.wrong_points == 0);
  CHECK(std::abs(difference) < tolerance);
}

TEST_CASE("a mesh that reaches beyond the volume, its corners on voxel centres") {
  VolumeGeometry g;
  g.size = {20, 18, 16};
  const PartMap part = ball_part(g);
  // An octahedron about a voxel centre: rows meet its corners and edges exactly.
  const TriangleMesh mesh = ball_mesh({10, 9, 8}, 12, 0);
  const TemporaryFolder folder;
  const std::filesystem::path file = folder / "zone.stl";
  write_stl(mesh, file);
  ZoneSpec zone;
  zone.id = "mesh";
  zone.shape = ZoneShape::mesh;
  zone.file = file;
  const ZoneSet zones = zones_of({zone}, g, part);
  std::int64_t wrong = 0;
  std::vector<Run> runs;
  for (std::int64_t z = 0; z < g.size[2]; ++z) {
    for (std::int64_t y = 0; y < g.size[1]; ++y) {
      zones.row_intervals(0, y, z, runs);
      for (std::int64_t x = 0; x < g.size[0]; ++x) {
        const std::int64_t reach = std::abs(x - 10) + std::abs(y - 9) + std::abs(z - 8);
        const bool in =
            std::any_of(runs.begin(), runs.end(), [&](const Run& r) { return r.begin <= x && x < r.end; });
        if (reach != 12) wrong += in != (reach < 12);  // on the face either answer serves
      }
    }
  }
  CHECK(wrong == 0);
}

TEST_CASE("sums over zones and cells are those of single voxels") {
  const VolumeGeometry g = turned_geometry();
  const PartMap part = ball_part(g);
  const Vec3 m = middle_of(g);
  ZoneSpec insert = sphere_zone("insert", m + Vec3{1, 0, 0}, 1.5);
  insert.use = ZoneUse::exclude;
  const ZoneSet zones = zones_of({sphere_zone("middle", m, 3), insert}, g, part);
  PoreField field;  // windows of two pores, beside each other along x, and values of any kind
  field.windows = labels_of(g.size, [](auto x, auto y, auto z) {
    if (y < 15 || y > 36 || z < 12 || z > 33) return 0;
    return x >= 12 && x < 29 ? 1 : x >= 29 && x < 44 ? 2 : 0;
  });
  phantoms::Uniform random(31);
  for (std::int64_t i = 0; i < field.windows.voxel_count(); ++i)
    field.fraction.push_back(static_cast<std::int16_t>(random(-500, 4096)));
  const std::array<std::int64_t, 3> cell{5, 7, 4};
  const ZoneSums sums = sum_zone(field, 2, part, zones, 0);
  const CellSums cells = sum_cells(field, {0, 0, 1}, part, zones, 0, cell);

  std::int64_t part_voxels = 0, pore[3] = {0, 0, 0};
  std::vector<std::int64_t> cell_part(cells.part.size(), 0), cell_pore(cells.pore.size(), 0);
  std::size_t at = 0;
  for (std::int64_t z = 0; z < g.size[2]; ++z) {
    for (std::int64_t y = 0; y < g.size[1]; ++y) {
      for (std::int64_t x = 0; x < g.size[0]; ++x) {
        std::int32_t label = 0;
        for (const LabelRun& r : field.windows.row(y, z)) {
          if (r.begin <= x && x < r.end) label = r.label;
        }
        const std::int64_t value = label != 0 ? field.fraction[at++] : 0;
        const Vec3 p =
            g.index_to_mm({static_cast<double>(x), static_cast<double>(y), static_cast<double>(z)});
        if (length(p - m) > 3 || length(p - m - Vec3{1, 0, 0}) <= 1.5) continue;
        const std::size_t c = cells.at(x / cell[0], y / cell[1], z / cell[2]);
        pore[label] += value;
        if (label == 2) cell_pore[c] += value;
        if (!contains(part.inside, x, y, z)) continue;
        ++part_voxels;
        ++cell_part[c];
      }
    }
  }
  CHECK(part_voxels > 1000);
  CHECK(sums.part_voxels == part_voxels);
  CHECK(sums.pore[1] == pore[1]);
  CHECK(sums.pore[2] == pore[2]);
  CHECK(cells.part == cell_part);
  CHECK(cells.pore == cell_pore);
}

TEST_CASE("zones that hold nothing are refused with their name and the volume's place") {
  const VolumeGeometry g = turned_geometry();
  const PartMap part = ball_part(g);
  const Vec3 m = middle_of(g);
  const auto sentence = [&](std::vector<ZoneSpec> zones) {
    return sentence_of([&] { zones_of(std::move(zones), g, part); });
  };
  const std::string outside = sentence({box_zone("flange", m + Vec3{40, 0, 0}, m + Vec3{42, 5, 5})});
  INFO(outside);
  CHECK(holds(outside, "zone 'flange' holds no voxel of the volume, which spans ["));
  CHECK(holds(outside, "check its position"));
  // Smaller than a voxel, between voxel centres.
  const Vec3 between = g.index_to_mm({10.5, 10.5, 10.5});
  CHECK(holds(sentence({sphere_zone("speck", between, 0.05)}), "zone 'speck' holds no voxel"));
  CHECK(holds(sentence({sphere_zone("a", m, 1), sphere_zone("b", m, 2),
                        set_zone("none", ZoneShape::difference, {"a", "b"})}),
              "zone 'none' holds no voxel"));
  ZoneSpec deep;
  deep.id = "deep";
  deep.shape = ZoneShape::skin;
  deep.from_depth_mm = 20;
  deep.depth_mm = 21;
  CHECK(holds(sentence({deep}), "zone 'deep' holds no voxel"));
  CHECK(holds(sentence({set_zone("lost", ZoneShape::union_of, {"nowhere"})}), "no zone 'nowhere'"));
  const ZoneSet zones = zones_of({sphere_zone("a", m, 1)}, g, part);
  CHECK(holds(sentence_of([&] { zones.index_of("b"); }), "no zone 'b'"));
}

TEST_CASE("a mesh with a hole is refused") {
  const VolumeGeometry g = turned_geometry();
  TriangleMesh mesh = ball_mesh(middle_of(g), 2, 1);
  mesh.triangles.pop_back();
  const TemporaryFolder folder;
  const std::filesystem::path file = folder / "zone.stl";
  write_stl(mesh, file);
  ZoneSpec zone;
  zone.id = "shell";
  zone.shape = ZoneShape::mesh;
  zone.file = file;
  const std::string sentence = sentence_of([&] { zones_of({zone}, g, ball_part(g)); });
  INFO(sentence);
  CHECK(holds(sentence, "zones: shell: the mesh is not closed: 3 edges"));
}
