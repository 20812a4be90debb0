#include <algorithm>
#include <cmath>
#include <cstdio>
#include <functional>
#include <numbers>

#include "tests/benchmarks/accuracy_figures.h"

namespace halfmark::accuracy {

namespace {

using phantoms::Ball;
using phantoms::Uniform;

constexpr double blur = 1.0, contrast_to_noise = 15;

double ball_volume(double diameter) { return std::numbers::pi / 6 * diameter * diameter * diameter; }

// One line of the table; a gross failure is marked and remembered.
class Table {
 public:
  Table() {
    std::printf(
        "Blur %.1f voxel, contrast-to-noise %g, 8 %% cupping.\n\n| phantom | figures | |\n|---|---|---|\n",
        blur, contrast_to_noise);
  }
  void row(const char* name, const std::string& figures, bool sound) {
    std::printf("| %s | %s | %s |\n", name, figures.c_str(), sound ? "" : "**gross failure**");
    std::fflush(stdout);
    sound_ = sound_ && sound;
  }
  bool sound() const { return sound_; }

 private:
  bool sound_ = true;
};

template <class... Values>
std::string text(const char* format, Values... values) {
  char buffer[400];
  std::snprintf(buffer, sizeof buffer, format, values...);
  return buffer;
}

ScanModel usual_scan() { return scan_model(blur, contrast_to_noise, 0.08); }

Chain chain_of(const std::vector<ScannedBody>& bodies, const VolumeGeometry& geometry,
               const ScanModel& scan) {
  return run_chain(render_scan(bodies, geometry, scan), 6, false);
}

// Pores whose centre lies within reach of a place.
std::vector<const Pore*> near(const std::vector<Pore>& pores, const Vec3& place, double reach) {
  std::vector<const Pore*> out;
  for (const Pore& pore : pores) {
    if (length(pore.centre_mm - place) < reach) out.push_back(&pore);
  }
  return out;
}

Vec3 random_direction(Uniform& random) {
  for (;;) {
    const Vec3 v{random(-1, 1), random(-1, 1), random(-1, 1)};
    const double l = length(v);
    if (l > 0.1 && l < 1) return (1 / l) * v;
  }
}

// Places in the block of balls_in_block, far apart: balls of a size that leaves room, without the balls.
phantoms::BallPhantom places(std::size_t count, double room, std::uint64_t seed) {
  auto out =
      phantoms::balls_in_block(phantoms::cube_geometry(160), std::vector<double>(count, room), 5, seed);
  out.bodies.resize(1);
  return out;
}

void touching_pairs(Table& table) {
  for (const double distance : {6.0, 8.0, 9.0}) {
    auto phantom = places(30, 18, 3);
    Uniform random(4);
    for (const Ball& place : phantom.balls) {
      const Vec3 half = (0.5 * distance) * random_direction(random);
      phantom.bodies.push_back(
          {united({sphere(place.centre_mm - half, 4), sphere(place.centre_mm + half, 4)}), 0});
    }
    const Chain chain = chain_of(phantom.bodies, phantom.geometry, usual_scan());
    // Two balls less the lens they share.
    const double lens = distance < 8 ? std::numbers::pi * (8 - distance) * (8 - distance) *
                                           (distance * distance + 16 * distance) / (12 * distance)
                                     : 0;
    const double truth = 2 * ball_volume(8) - lens;
    int two = 0, some = 0;
    double volume = 0;
    std::size_t matched = 0;
    for (const Ball& place : phantom.balls) {
      const auto pores = near(chain.found.pores, place.centre_mm, 8);
      two += pores.size() == 2;
      some += !pores.empty();
      matched += pores.size();
      double sum = 0;
      for (const Pore* pore : pores) sum += pore->volume_mm3.value;
      volume += sum / truth - 1;
    }
    const int total = static_cast<int>(phantom.balls.size());
    volume *= 100.0 / total;
    const auto false_pores = static_cast<int>(chain.found.pores.size() - matched);
    table.row(
        "pairs of 8-voxel pores",
        text("centres %g voxels apart: found %d of %d, as two %d, mean error of the pair's volume %+.1f %%, "
             "false %d",
             distance, some, total, two, volume, false_pores),
        some == total && std::abs(volume) < 5 && false_pores == 0);
  }
}

void under_a_face(Table& table) {
  const auto geometry = phantoms::cube_geometry(144);
  const Vec3 middle{71.5, 71.5, 71.5};
  for (const double diameter : {5.0, 8.0}) {
    for (const double left : {2.0, 3.0, 4.0}) {
      const auto turn = phantoms::slight_turn();
      const Vec3 low{20, 20, 20}, high{124, 124, 124}, shift{0.31, 0.17, 0.43};
      std::vector<ScannedBody> bodies{{moved(box(low, high), turn, middle, shift), 1}};
      Uniform random(11);
      std::vector<Ball> balls;
      for (std::size_t face = 0; face < 3; ++face) {
        for (int i = 0; i < 16; ++i) {
          Vec3 p;
          const std::size_t u = (face + 1) % 3, v = (face + 2) % 3;
          p[face] = high[face] - left - 0.5 * diameter;
          p[u] = low[u] + 16 + 22 * (i % 4) + random(-3, 3);
          p[v] = low[v] + 16 + 22 * static_cast<double>(i / 4) + random(-3, 3);
          const SolidPtr pore = moved(sphere(p, 0.5 * diameter), turn, middle, shift);
          const SolidBounds bounds = pore->bounds();
          balls.push_back({0.5 * (bounds.min_mm + bounds.max_mm), diameter});
          bodies.push_back({pore, 0});
        }
      }
      const Chain chain = chain_of(bodies, geometry, usual_scan());
      const Comparison result = compare(balls, chain.found.pores);
      const ClassFigures& f = result.classes.at(diameter);
      table.row(
          "pores under a face",
          text("%g voxels across, %g voxels left: found %d of %d, mean volume error %+.1f %%, centre RMS "
               "%.2f voxel, false %d",
               diameter, left, f.found, f.total, f.volume_error_percent(), f.centre_rms(),
               result.false_pores),
          f.found == f.total && std::abs(f.volume_error_percent()) < 15 && result.false_pores == 0);
    }
  }
}

void thin_discs(Table& table) {
  auto phantom = places(24, 22, 5);
  Uniform random(6);
  for (const Ball& place : phantom.balls) {
    const Vec3 half = 0.5 * random_direction(random);
    phantom.bodies.push_back({cylinder(place.centre_mm - half, place.centre_mm + half, 8), 0});
  }
  const Chain chain = chain_of(phantom.bodies, phantom.geometry, usual_scan());
  const double truth = std::numbers::pi * 64;
  int found = 0, single = 0;
  double volume = 0;
  std::size_t matched = 0;
  for (const Ball& place : phantom.balls) {
    const auto pores = near(chain.found.pores, place.centre_mm, 9);
    found += !pores.empty();
    single += pores.size() == 1;
    matched += pores.size();
    double sum = 0;
    for (const Pore* pore : pores) sum += pore->volume_mm3.value;
    volume += sum / truth - 1;
  }
  const int total = static_cast<int>(phantom.balls.size());
  volume *= 100.0 / total;
  table.row(
      "discs one voxel thick, 16 across",
      text("found %d of %d, in one piece %d, mean volume error %+.1f %%, false %d", found, total, single,
           volume, static_cast<int>(chain.found.pores.size() - matched)),
      found == total && single == total && std::abs(volume) < 10 && chain.found.pores.size() == matched);
}

void diffuse_cloud(Table& table) {
  for (const double share : {0.98, 0.95, 0.9}) {
    auto phantom = phantoms::balls_in_block(phantoms::cube_geometry(160), {30, 30, 8, 6, 5}, 6, 9);
    phantom.bodies.resize(1);
    double truth = 0;
    for (const Ball& ball : phantom.balls) {
      const bool cloud = ball.diameter_mm > 20;
      phantom.bodies.push_back({sphere(ball.centre_mm, 0.5 * ball.diameter_mm), cloud ? share : 0});
      if (cloud) truth += (1 - share) * ball_volume(ball.diameter_mm);
    }
    const Chain chain = chain_of(phantom.bodies, phantom.geometry, usual_scan());
    double volume = 0, uncertainty = 0;
    int clouds = 0, others = 0;
    for (const Pore& pore : chain.found.pores) {
      bool in_cloud = false;
      for (std::size_t i = 0; i < 2; ++i)
        in_cloud = in_cloud || length(pore.centre_mm - phantom.balls[i].centre_mm) < 17;
      others += !in_cloud;
      if (!in_cloud) continue;
      clouds += pore.kind == PoreKind::diffuse;
      volume += pore.volume_mm3.value;
      uncertainty += pore.volume_mm3.standard_uncertainty * pore.volume_mm3.standard_uncertainty;
    }
    table.row(
        "diffuse clouds, 30 across",
        text("%.0f %% porosity: listed as diffuse %d of 2, volume %.0f voxels (standard uncertainty %.0f), "
             "truth %.0f; other pores found %d of 3",
             100 * (1 - share), clouds, volume, std::sqrt(uncertainty), truth, others),
        others == 3 && (share > 0.97 || (clouds == 2 && std::abs(volume / truth - 1) < 0.35)));
  }
}

void balls_with(Table& table, const char* name, const ScanModel& scan, const Vec3& spacing = {1, 1, 1},
                double least_found = 4) {
  std::vector<double> diameters;
  for (const double d : {12.0, 8.0, 6.0, 5.0, 4.0, 3.0}) diameters.insert(diameters.end(), d > 9 ? 8 : 24, d);
  const double share = scan.padding_radius_mm > 0 ? 0.66 : 0.8;
  const auto phantom =
      phantoms::balls_in_block(phantoms::cube_geometry(176, spacing), diameters, 6, 15, share);
  const Chain chain = run_chain(render_scan(phantom.bodies, phantom.geometry, scan), 6, false);
  const Comparison result = compare(phantom.balls, chain.found.pores);
  std::string figures = text("smoothed noise %.4f, seeds from %.3f, false %d", chain.found.smoothed_noise,
                             chain.found.seed_threshold, result.false_pores);
  bool sound = result.false_pores == 0;
  for (const auto& [diameter, f] : result.classes) {
    figures +=
        text("; %g: found %d of %d, volume %+.1f %%", diameter, f.found, f.total, f.volume_error_percent());
    sound =
        sound && (diameter < least_found || (f.found == f.total && std::abs(f.volume_error_percent()) < 10));
  }
  table.row(name, figures, sound);
}

}  // namespace

bool print_further_phantoms() {
  Table table;
  touching_pairs(table);
  under_a_face(table);
  thin_discs(table);
  diffuse_cloud(table);
  ScanModel correlated = usual_scan();
  correlated.noise_correlation_voxel = 0.8;
  balls_with(table, "noise correlated over 0.8 voxel", correlated, {1, 1, 1}, 5);
  for (const double share : {0.03, 0.08}) {
    ScanModel rings = usual_scan();
    rings.ring_grey = share * (rings.material_grey - rings.air_grey);
    balls_with(table, text("rings of %g %% of the contrast", 100 * share).c_str(), rings, {1, 1, 1}, 5);
  }
  ScanModel padded = usual_scan();
  padded.padding_radius_mm = 84;
  balls_with(table, "zero padding outside a cylinder", padded);
  balls_with(table, "voxels 1 x 1 x 1.25", usual_scan(), {1, 1, 1.25});
  return table.sound();
}

}  // namespace halfmark::accuracy
