#include <cmath>

#include "analysis/material_level.h"
#include "tests/support/catch.h"
#include "tests/support/phantoms.h"

using namespace halfmark;

TEST_CASE("the level follows cupping to a thousandth of the contrast, pores or not") {
  for (const double cnr : {30.0, 10.0, 5.0}) {
    for (const double cupping : {0.0, 0.08}) {
      std::vector<double> diameters;
      for (const double d : {14.0, 10.0, 6.0, 4.0, 3.0, 2.0})
        diameters.insert(diameters.end(), d > 9 ? 4 : 20, d);
      const auto phantom = phantoms::balls_in_block(phantoms::cube_geometry(144), diameters, 4, 9);
      ScanModel scan;
      scan.air_grey = 20000;
      scan.material_grey = 45000;
      scan.blur_voxel = 1;
      scan.noise_grey = 25000 / cnr;
      scan.cupping = cupping;
      const auto volume = render_scan(phantom.bodies, phantom.geometry, scan);
      const FieldOfView field = whole_field(phantom.geometry);
      const GreyLevels levels = find_grey_levels(volume, field);
      const PartMap part = find_part(volume, field, levels, {6, 2, 0});
      const MaterialLevel level = fit_material_level(volume, field, levels, part);
      const double c = 71.5;
      double worst = 0, mean = 0;
      int n = 0;
      for (double r = 0; r <= 48; r += 4) {
        for (const double z : {40.0, 71.0, 100.0}) {
          const double truth = 45000 - cupping * 25000 * (1 - r * r / (72.0 * 72.0));
          const double error = (level.at(c + 0.8 * r, c - 0.6 * r, z) - truth) / 25000;
          worst = std::max(worst, std::abs(error));
          mean += error;
          ++n;
        }
      }
      mean /= n;
      INFO("contrast-to-noise " << cnr << ", cupping " << cupping << ": mean error " << 100 * mean
                                << " %, worst " << 100 * worst << " % of contrast, stated "
                                << 100 * level.standard_uncertainty / 25000 << " %");
      CHECK(std::abs(mean) < (cnr < 10 ? 0.004 : 0.0015));
      CHECK(worst < (cnr < 10 ? 0.012 : 0.005));
      CHECK(std::abs(level.spread_percent - 100 * cupping) < 3);
      std::vector<float> row(40);
      level.row(60, 70, 50, 90, row.data());
      CHECK(static_cast<double>(row[7]) == Approx(level.at(57, 60, 70)).epsilon(1e-5));
    }
  }
}
