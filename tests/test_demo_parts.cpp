#include <algorithm>
#include <cmath>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "demo_volumes/demo_part.h"
#include "demo_volumes/part_builder.h"
#include "demo_volumes/solid_integral.h"
#include "tests/support/catch.h"
#include "tests/support/phantoms.h"

using namespace halfmark;

namespace {

// Volume where `inside` holds, by counting points of a regular grid: nothing of the integration it checks.
template <class Inside>
double counted_volume_mm3(const SolidBounds& bounds, double step, const Inside& inside) {
  std::int64_t count = 0;
  for (double z = bounds.min_mm[2] + 0.31 * step; z < bounds.max_mm[2]; z += step) {
    for (double y = bounds.min_mm[1] + 0.57 * step; y < bounds.max_mm[1]; y += step) {
      for (double x = bounds.min_mm[0] + 0.43 * step; x < bounds.max_mm[0]; x += step)
        count += inside(Vec3{x, y, z}) ? 1 : 0;
    }
  }
  return static_cast<double>(count) * step * step * step;
}

double rendered_volume_mm3(const DemoPart& part, const std::vector<ScannedBody>& bodies) {
  ScanModel scan;
  scan.air_grey = 0;
  scan.material_grey = 1;
  scan.blur_voxel = 0;
  scan.type = VoxelType::f32;
  const auto volume = render_scan(bodies, part.geometry, scan);
  double sum = 0;
  for (std::int64_t i = 0; i < part.geometry.voxel_count(); ++i) sum += volume.voxels<float>()[i];
  return sum * part.geometry.voxel_volume_mm3();
}

double sum_of(const Json& list, const char* key) {
  double sum = 0;
  for (const Json& entry : list) sum += entry.at(key).get<double>();
  return sum;
}

}  // namespace

TEST_CASE("integrated solids have their volumes and centres") {
  const double pi = std::acos(-1.0);
  const auto ball = integrate(*sphere({1.3, 2.1, -0.4}, 0.7), 0.05);
  CHECK(ball.volume_mm3 == Approx(4.0 / 3.0 * pi * 0.343).epsilon(1e-4));
  CHECK(length(ball.centre_mm - Vec3{1.3, 2.1, -0.4}) < 1e-4);
  CHECK(integrate(*ellipsoid({0, 0, 0}, {0.5, 1, 2}), 0.05).volume_mm3 ==
        Approx(4.0 / 3.0 * pi).epsilon(2e-4));
  CHECK(integrate(*torus({0, 0, 0}, {0, 1, 1}, 2, 0.5), 0.1).volume_mm3 ==
        Approx(2 * pi * pi * 2 * 0.25).epsilon(2e-4));
  // Two unit balls, centres 1 apart: each without half of their common lens of 1.308997 (published formula,
  // pi (4 R + d)(2 R - d)^2 / 12).
  CHECK(integrate(*united({sphere({0, 0, 0}, 1), sphere({1, 0, 0}, 1)}), 0.05).volume_mm3 ==
        Approx(8.0 / 3.0 * pi - 1.308997).epsilon(2e-4));
  CHECK(integrate(*intersected({sphere({0, 0, 0}, 1), sphere({1, 0, 0}, 1)}), 0.05).volume_mm3 ==
        Approx(1.308997).epsilon(2e-4));
}

TEST_CASE("a demo part's volumes are what its bodies hold, counted and rendered") {
  for (const std::string name : {"bracket", "grille", "sound_block"}) {
    const DemoPart part = demo_part(name);
    const Json truth = Json::parse(part.truth_json);
    const Json& pores = truth.at("pores");
    INFO(name);
    // Each pore by counting points within its own body and the part's.
    const Solid& body = *part.bodies[0].body;
    for (std::size_t i = 0; i < pores.size(); ++i) {
      const Solid& pore = *part.bodies[i + 1].body;
      REQUIRE(part.bodies[i + 1].grey_share == 0);
      const double stated = pores[i].at("volume_mm3").get<double>();
      const double counted = counted_volume_mm3(pore.bounds(), std::cbrt(stated) / 60, [&](const Vec3& p) {
        return pore.signed_distance_mm(p) < 0 && body.signed_distance_mm(p) < 0;
      });
      INFO("pore " << i + 1 << ": stated " << stated << " mm3, counted " << counted << ", difference "
                   << 100 * (counted / stated - 1) << " %");
      CHECK(std::abs(counted / stated - 1) < 0.005);
      const auto d = pores[i].at("equivalent_diameter_mm").get<double>();
      CHECK(std::acos(-1.0) / 6 * d * d * d == Approx(stated).epsilon(1e-4));
    }
    // All of it as the renderer sees it: no overlap may have been counted twice.
    const double pore_sum = sum_of(pores, "volume_mm3");
    const double material = truth["part"].at("material_volume_mm3").get<double>();
    double expected = material + sum_of(truth["debris"], "volume_mm3");
    for (const Json& inclusion : truth["inclusions"])
      expected += (inclusion.at("grey_share").get<double>() - 1) * inclusion.at("volume_mm3").get<double>();
    const double rendered = rendered_volume_mm3(part, part.bodies);
    const double filled = rendered_volume_mm3(part, {part.bodies[0]});
    INFO("material rendered " << rendered << " mm3, stated " << expected << "; filled rendered " << filled
                              << ", stated " << material + pore_sum);
    CHECK(std::abs(rendered / expected - 1) < 2e-4);
    CHECK(std::abs(filled / (material + pore_sum) - 1) < 2e-4);
    CHECK(truth["part"].at("porosity_percent").get<double>() ==
          Approx(100 * pore_sum / (material + pore_sum)).margin(1e-5));
  }
}

TEST_CASE("walls of the demo parts are as thick as stated") {
  for (const std::string name : {"bracket", "grille", "sound_block"}) {
    const DemoPart part = demo_part(name);
    const Solid& body = *part.bodies[0].body;
    for (const Json& wall : Json::parse(part.truth_json).at("walls")) {
      const auto p = wall.at("position_mm").get<Vec3>();
      const double stated = wall.at("thickness_mm").get<double>();
      // The position lies in mid-wall: the nearest surface is half a wall away, and so is one on the other
      // side.
      INFO(name << ", " << wall.at("wall") << ": stated " << stated
                << " mm, twice the distance to the surface " << -2 * body.signed_distance_mm(p));
      CHECK(-2 * body.signed_distance_mm(p) == Approx(stated).margin(0.002));
    }
  }
}

TEST_CASE("a demo part can be made finer, and the casting of any size") {
  const DemoPart coarse = demo_part("bracket"), fine = demo_part("bracket", {2, 256});
  CHECK(fine.geometry.size[0] == 2 * coarse.geometry.size[0]);
  CHECK(Json::parse(fine.truth_json)["pores"] == Json::parse(coarse.truth_json)["pores"]);
  const DemoPart casting = demo_part("casting", {1, 160});
  CHECK(casting.geometry.size[2] == 160);
  const Json truth = Json::parse(casting.truth_json);
  CHECK(truth["part"].at("porosity_percent").get<double>() == Approx(1).margin(0.05));
  const double share = (truth["part"].at("material_volume_mm3").get<double>() +
                        truth["part"].at("pore_volume_mm3").get<double>()) /
                       (16.0 * 16.0 * 16.0);
  INFO("the casting fills " << share << " of its volume");
  CHECK((share > 0.4 && share < 0.6));
  const double rendered = rendered_volume_mm3(casting, casting.bodies);
  CHECK(rendered == Approx(truth["part"].at("material_volume_mm3").get<double>()).epsilon(2e-4));
  CHECK_THROWS_AS(demo_part("casting", {1, 10}), Problem);
  CHECK_THROWS_AS(demo_part("bracket", {0, 256}), Problem);
  try {
    demo_part("no_such_part");
    FAIL("no problem was thrown");
  } catch (const Problem& problem) {
    CHECK(problem.status() == ExitStatus::usage);
    for (const std::string& name : demo_names())
      CHECK(std::string(problem.what()).find(name) != std::string::npos);
  }
}

TEST_CASE("a result is compared with the truth by verdicts and values") {
  const DemoPart part = demo_part("bracket");
  Json result = Json::parse(part.truth_json);  // has the same keys where the comparison looks
  for (Json& requirement : result["requirements"]) requirement["measured"] = requirement["value"];
  CHECK(compare_with_truth(result.dump(), part.truth_json).empty());

  Json other = result;
  other["verdict"] = "accept";
  other["requirements"][1]["verdict"] = "undecided";
  other["requirements"][0]["measured"] = 2.5;
  other["requirements"].erase(5);
  const std::string differences = compare_with_truth(other.dump(), part.truth_json);
  INFO(differences);
  CHECK(differences.find("verdict: \"accept\"") != std::string::npos);
  CHECK(differences.find("R1: measured 2.5") != std::string::npos);
  CHECK(differences.find("R2: undecided") != std::string::npos);
  CHECK(differences.find("R6: missing") != std::string::npos);
  CHECK(std::count(differences.begin(), differences.end(), '\n') == 4);
  for (const std::string text : {"", "[]", "{", "{\"verdict\": 1}"})
    CHECK_THROWS_AS(compare_with_truth(text, part.truth_json), Problem);
}
