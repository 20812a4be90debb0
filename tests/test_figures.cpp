// The report's pictures on a part with known pores: marks lie where the pores are, nothing is blank, the
// bytes repeat.
#include <QImage>
#include <cmath>

#include "reports/canvas.h"
#include "reports/chart_figure.h"
#include "reports/contour.h"
#include "reports/part_figure.h"
#include "reports/scene_render.h"
#include "reports/slice_figure.h"
#include "reports/slice_plan.h"
#include "tests/support/catch.h"
#include "tests/support/sample_run.h"

using namespace halfmark;

namespace {

struct Fixture {
  MemoryVolume volume = sample::volume();
  InspectionRun run = sample::run(volume);
  std::vector<EvidencePlace> places = evidence_places(run.inspection);
};

bool is_near(QRgb pixel, const Rgb& colour, int tolerance) {
  return std::abs(qRed(pixel) - colour[0]) <= tolerance && std::abs(qGreen(pixel) - colour[1]) <= tolerance &&
         std::abs(qBlue(pixel) - colour[2]) <= tolerance;
}

// Pixels of a colour whose distance from (x, y) lies in [from, to].
int count_colour(const QImage& image, const Rgb& colour, double x, double y, double from, double to) {
  int count = 0;
  for (int j = 0; j < image.height(); ++j)
    for (int i = 0; i < image.width(); ++i) {
      const double r = std::hypot(i + 0.5 - x, j + 0.5 - y);
      if (r >= from && r <= to && is_near(image.pixel(i, j), colour, 24)) ++count;
    }
  return count;
}

TriangleMesh cube(double low, double high) {
  TriangleMesh mesh;
  for (int i = 0; i < 8; ++i)
    mesh.vertices_mm.push_back(
        {float(i & 1 ? high : low), float(i & 2 ? high : low), float(i & 4 ? high : low)});
  for (const auto& q : {std::array<std::uint32_t, 4>{0, 2, 3, 1},
                        {4, 5, 7, 6},
                        {0, 1, 5, 4},
                        {2, 6, 7, 3},
                        {0, 4, 6, 2},
                        {1, 3, 7, 5}}) {
    mesh.triangles.push_back({q[0], q[1], q[2]});
    mesh.triangles.push_back({q[0], q[2], q[3]});
  }
  return mesh;
}

}  // namespace

TEST_CASE("Places are lettered by severity and requirements at one pore share a place") {
  Fixture f;
  REQUIRE(f.places.size() == 2);
  CHECK(f.places[0].letter == "A");
  CHECK(f.places[0].verdict == Verdict::reject);
  CHECK(letter_of(f.places, 1) == "B");
  CHECK(letter_of(f.places, 2).empty());
  f.run.inspection.requirements[2].evidence = f.run.inspection.requirements[0].evidence;
  const auto shared = evidence_places(f.run.inspection);
  REQUIRE(shared.size() == 2);
  CHECK(shared[0].requirements == std::vector<std::size_t>{0, 2});
}

TEST_CASE("The slice shows the deciding pore in the middle with its outline at its radius") {
  Fixture f;
  const auto figures = slice_figures(f.run, f.volume, f.places);
  const SlicePlan plan = plan_slice(f.run, f.volume.geometry(), f.places[0]);
  const QImage image = image_of(figures[0].detail.picture);
  REQUIRE(image.width() == figures[0].detail.picture.width);
  const double px_per_voxel = double(image.width()) / double(plan.detail.width());
  const double x = (plan.index[0] - double(plan.detail.begin[0]) + 0.5) * px_per_voxel;
  const double y = image.height() - (plan.index[1] - double(plan.detail.begin[1]) + 0.5) * px_per_voxel;
  CAPTURE(x, y, px_per_voxel, plan.detail.axis, plan.detail.index);
  // The pore is dark in its middle and the material beyond it is bright.
  CHECK(qGreen(image.pixel(int(x), int(y))) < 80);
  CHECK(qGreen(image.pixel(int(x + 10 * px_per_voxel), int(y + 2 * px_per_voxel))) > 150);
  // The outline lies at the radius of 6 voxels, within one; none nearer to the middle.
  CHECK(count_colour(image, vermilion, x, y, 5 * px_per_voxel, 7 * px_per_voxel) > 300);
  CHECK(count_colour(image, vermilion, x, y, 0, 4.5 * px_per_voxel) == 0);
  CHECK(!figures[0].overview.picture.empty());
}

TEST_CASE("Slices across every axis are the voxels of the volume") {
  VolumeGeometry g;
  g.size = {7, 5, 6};
  MemoryVolume volume(g, VoxelType::i16);
  const auto value = [](std::int64_t x, std::int64_t y, std::int64_t z) { return x - 10 * y + 100 * z; };
  for (std::int64_t z = 0; z < 6; ++z)
    for (std::int64_t y = 0; y < 5; ++y)
      for (std::int64_t x = 0; x < 7; ++x)
        volume.voxels<std::int16_t>()[(z * 5 + y) * 7 + x] = static_cast<std::int16_t>(value(x, y, z));
  std::vector<SliceWindow> windows(3);
  for (int axis = 0; axis < 3; ++axis) {
    windows[static_cast<std::size_t>(axis)].axis = axis;
    windows[static_cast<std::size_t>(axis)].index = 3;
    windows[static_cast<std::size_t>(axis)].begin = {1, 1};
    windows[static_cast<std::size_t>(axis)].end = {5, 4};
  }
  windows[1].step = 2;
  const auto slices = read_slices(volume, windows);
  for (const GreySlice& s : slices)
    for (std::int64_t v = 0; v < s.window.height(); ++v)
      for (std::int64_t u = 0; u < s.window.width(); ++u) {
        std::array<std::int64_t, 3> p{3, 3, 3};
        p[static_cast<std::size_t>(s.window.u_axis())] = 1 + u * s.window.step;
        p[static_cast<std::size_t>(s.window.v_axis())] = 1 + v * s.window.step;
        CAPTURE(s.window.axis, u, v);
        CHECK(s.at(u, v) == float(value(p[0], p[1], p[2])));
      }
}

TEST_CASE("Iso-lines of a ramp and of a disc lie where the values cross the level") {
  std::vector<float> ramp(25), disc(41 * 41);
  for (std::size_t i = 0; i < 25; ++i) ramp[i] = float(i % 5);
  for (const Segment& s : contour(ramp, 5, 5, 1.25f)) {
    CHECK(s[0] == Approx(1.25));
    CHECK(s[2] == Approx(1.25));
  }
  for (int y = 0; y < 41; ++y)
    for (int x = 0; x < 41; ++x) disc[std::size_t(y * 41 + x)] = float(std::hypot(x - 20, y - 20));
  double perimeter = 0;
  for (const Segment& s : contour(disc, 41, 41, 12.5f)) {
    CHECK(std::hypot(s[0] - 20, s[1] - 20) == Approx(12.5).margin(0.02));
    perimeter += std::hypot(s[2] - s[0], s[3] - s[1]);
  }
  CHECK(perimeter == Approx(2 * std::numbers::pi * 12.5).epsilon(0.005));
}

TEST_CASE("A cube rendered from the front covers its square and each layer of glass takes the same share") {
  const Camera camera = camera_at({-1, -1, -1}, {1, 1, 1}, 0, 0, 200, 200, 50);
  CHECK(camera.px_per_mm == Approx(50));
  SceneRender solid(camera), glass(camera), two(camera);
  solid.add_solid(cube(-1, 1), vermilion);
  glass.add_glass(cube(-1, 1));
  two.add_glass(cube(-1, 1));
  two.add_glass(cube(-0.5, 0.5));
  const auto s = solid.pixels(), g = glass.pixels(), t = two.pixels();
  int covered = 0;
  for (std::size_t i = 0; i < s.size(); i += 3) covered += s[i + 2] < 250;
  CHECK(covered == Approx(100 * 100).epsilon(0.01));
  // Seamless: along a diagonal, where triangles meet, the glass is as clear as beside it.
  for (int i = 60; i < 140; ++i) {
    const int here = g[std::size_t((i * 200 + i) * 3)], beside = g[std::size_t((i * 200 + i + 7) * 3)];
    CHECK(std::abs(here - beside) <= 6);
  }
  const std::size_t middle = std::size_t((100 * 200 + 100) * 3), edge = std::size_t((60 * 200 + 100) * 3);
  CHECK(t[middle] < g[middle]);
  CHECK(t[edge] == g[edge]);
}

TEST_CASE("The part's picture shows each pore in its verdict's colour at its projected place") {
  Fixture f;
  const Figure figure = part_figure(f.run, f.volume.geometry(), {});
  const QImage image = image_of(figure.picture);
  const auto count = [&](const Rgb& hue) {
    int n = 0;
    for (int y = 0; y < image.height(); ++y)
      for (int x = 0; x < image.width(); ++x) {
        const QRgb p = image.pixel(x, y);
        const auto share = [&](int value, int full) { return full ? double(value) / full : 0.0; };
        // A shade of the hue: its strongest channel sets the brightness.
        const double shade =
            std::max({share(qRed(p), hue[0]), share(qGreen(p), hue[1]), share(qBlue(p), hue[2])});
        const Rgb expected{std::uint8_t(std::min(255.0, shade * hue[0])),
                           std::uint8_t(std::min(255.0, shade * hue[1])),
                           std::uint8_t(std::min(255.0, shade * hue[2]))};
        if (shade > 0.4 && shade < 1.02 && is_near(p, expected, 40)) ++n;
      }
    return n;
  };
  CHECK(count(vermilion) > 2000);
  CHECK(count(blue) > 200);
  CHECK(count(yellow) > 500);
}

TEST_CASE("Size classes follow the preferred numbers and hold every pore") {
  std::vector<Pore> pores(4);
  const double diameters[] = {0.5, 0.629, 0.63, 1.9};
  for (std::size_t i = 0; i < 4; ++i) pores[i].equivalent_diameter_mm = diameters[i];
  pores[3].kind = PoreKind::inclusion;
  const auto classes = size_classes(pores);
  REQUIRE(classes.size() == 10);
  std::int64_t all = 0;
  for (const SizeClass& c : classes) {
    all += c.count;
    if (c.from_mm == Approx(0.5)) CHECK(c.count == 2);
    if (c.from_mm == Approx(0.63)) CHECK(c.count == 1);
  }
  CHECK(all == 3);
  CHECK(size_classes({}).empty());
}

TEST_CASE("Pictures repeat byte for byte") {
  Fixture f;
  const auto a = slice_figures(f.run, f.volume, f.places), b = slice_figures(f.run, f.volume, f.places);
  CHECK(a[0].detail.picture.png == b[0].detail.picture.png);
  CHECK(a[1].overview.picture.png == b[1].overview.picture.png);
  CHECK(part_figure(f.run, f.volume.geometry(), f.places).picture.png ==
        part_figure(f.run, f.volume.geometry(), f.places).picture.png);
  CHECK(pore_size_figure(f.run.inspection).picture.png == pore_size_figure(f.run.inspection).picture.png);
}

TEST_CASE("Odd evidence still makes pictures: outside the volume, not finite, a slice one voxel thick") {
  Fixture f;
  for (const Vec3& odd : {Vec3{1e9, -1e9, 0}, Vec3{std::nan(""), 0, 0}, Vec3{-1, 0, 2}}) {
    EvidencePlace place = f.places[0];
    place.evidence.pore_id = 0;
    place.evidence.position_mm = odd;
    place.evidence.extent_mm = std::nan("");
    CHECK(!slice_figures(f.run, f.volume, {place})[0].detail.picture.empty());
  }
  VolumeGeometry flat;
  flat.size = {40, 1, 30};
  MemoryVolume volume(flat, VoxelType::u8);
  InspectionRun run;
  run.inspection.grey_levels.material = 1;
  EvidencePlace place = f.places[0];
  place.evidence = {0, Vec3{1, 0, 2}, 3, "place"};
  CHECK(!slice_figures(run, volume, {place})[0].detail.picture.empty());
}

TEST_CASE("Cancelling stops the pictures") {
  Fixture f;
  RunControl control;
  control.cancel();
  CHECK_THROWS_AS(slice_figures(f.run, f.volume, f.places, control), Problem);
}
