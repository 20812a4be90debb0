// One requirement's number with its uncertainty and the place that decides it, from pores, walls and zones.
// Knows no limits.
#pragma once

#include "analysis/inspection_result.h"
#include "analysis/material_level.h"
#include "analysis/pore_segmentation.h"
#include "analysis/zones.h"

namespace halfmark {

// Everything measured on the part, by reference; pores carry their zones already.
struct MeasuredPart {
  const VolumeGeometry& geometry;
  const GreyLevels& levels;
  const PartMap& part;
  const SegmentedPores& pores;
  const TriangleMesh* outer_surface = nullptr;  // pores filled; null unless walls were measured
  const WallMap* walls = nullptr;
  const TriangleMesh* surface = nullptr;  // of the material, for area and volume
  double smallest_expected_diameter_mm = 0;
};

// Sets Pore::zones and Pore::left_out.
void assign_zones(std::vector<Pore>& pores, const ZoneSet& zones);

// Fills has_value, measured, unit, evidence, warnings and, where there is no value, reason. Leaves the
// verdict alone.
RequirementResult measure_requirement(const Requirement& requirement, const InspectionSpec& spec,
                                      const ZoneSet& zones, const MeasuredPart& measured,
                                      const RunControl& control = {});

PoreSummary summarise_pores(const MeasuredPart& measured, const ZoneSet& zones);

}  // namespace halfmark
