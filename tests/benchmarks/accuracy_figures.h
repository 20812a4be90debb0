// What the accuracy tables share: the whole chain from grey values to pores, and pores against their truth.
#pragma once

#include <map>
#include <string>
#include <vector>

#include "analysis/pore_segmentation.h"
#include "tests/support/phantoms.h"

namespace halfmark::accuracy {

// Lengths are in voxels: the phantoms' voxels are 1 mm (1 x 1 x 1.25 where said).
struct Chain {
  GreyLevels levels;
  PartMap part;
  MaterialLevel level;
  SegmentedPores found, iso50;
  double searched_voxels = 0;  // inside the part
};

// Levels and blur are measured, not given. iso50 runs without a size filter.
Chain run_chain(const VolumeSource& volume, double closing_radius_mm = 6, bool with_iso50 = true);

struct ClassFigures {
  int total = 0, found = 0;
  double volume = 0, diameter_square = 0, centre_square = 0;  // sums over the found ones
  // Of the stated uncertainty: volumes within U (k = 2), summed |error| / u of volume.
  int volume_within = 0;
  double volume_pull = 0;
  void add(const ClassFigures& other);
  double found_percent() const { return total == 0 ? 0 : 100.0 * found / total; }
  double volume_error_percent() const { return found == 0 ? 0 : 100 * volume / found; }
  double diameter_rms() const;
  double within_percent() const { return found == 0 ? 0 : 100.0 * volume_within / found; }
  double mean_pull() const { return found == 0 ? 0 : volume_pull / found; }
  double centre_rms() const;
};

struct Comparison {
  std::map<double, ClassFigures> classes;  // by true diameter
  int false_pores = 0;
  std::vector<Pore> false_list;
};

// Each ball takes the nearest pore not yet taken whose centre lies within max(1 voxel, its radius), large
// balls first; pores that no ball takes are false.
Comparison compare(const std::vector<phantoms::Ball>& balls, const std::vector<Pore>& pores);

// 16-bit grey levels that no noise of the tables clips.
ScanModel scan_model(double blur_voxel, double contrast_to_noise, double cupping);

// Phantoms beyond the table, printed as a markdown table; true unless one fails grossly.
bool print_further_phantoms();

}  // namespace halfmark::accuracy
