#include "reports/report_method.h"

#include <algorithm>
#include <cmath>

#include "analysis/number_text.h"
#include "reports/program_text.h"

namespace halfmark {

namespace {

std::string plain_name(std::string key) {
  std::replace(key.begin(), key.end(), '_', ' ');
  return one_line(key);
}

std::string times(const std::array<std::string, 3>& parts) {
  return parts[0] + " × " + parts[1] + " × " + parts[2];
}

FactsBlock volume_facts(const Inspection& in) {
  const VolumeText& v = in.volume;
  const VolumeGeometry& g = v.geometry;
  FactsBlock facts;
  facts.facts.emplace_back(
      "File", one_line(file_name_of(v.file)) + (v.format.empty() ? "" : " (" + one_line(v.format) + ")"));
  if (!v.sha256.empty()) facts.facts.emplace_back("SHA-256", one_line(v.sha256));
  facts.facts.emplace_back(
      "Size", times({std::to_string(g.size[0]), std::to_string(g.size[1]), std::to_string(g.size[2])}) +
                  " voxels, " + one_line(v.voxel_type));
  facts.facts.emplace_back("Voxel size",
                           times({number_text(g.spacing_mm[0], 5), number_text(g.spacing_mm[1], 5),
                                  number_text(g.spacing_mm[2], 5)}) +
                               " mm");
  facts.facts.emplace_back("Field of view", number_text(100 * v.field_share, 3) + " % of the volume");
  for (const auto& [key, value] : v.scan)
    facts.facts.emplace_back("Scan: " + plain_name(key), one_line(value));
  return facts;
}

FactsBlock level_facts(const Inspection& in) {
  const GreyLevels& g = in.grey_levels;
  FactsBlock facts;
  facts.facts.emplace_back("Levels", "air " + number_text(g.air, 5) + ", material " +
                                         number_text(g.material, 5) + " (source: " + one_line(g.source) +
                                         ")");
  facts.facts.emplace_back("ISO-50 threshold",
                           measured_text(g.threshold, 2 * g.threshold_standard_uncertainty, "") + " (k = 2)");
  facts.facts.emplace_back(
      "Noise", "air " + number_text(g.air_noise, 3) + ", material " + number_text(g.material_noise, 3) +
                   (g.noise_is_white ? ", not correlated" : ", correlated between neighbours"));
  facts.facts.emplace_back("Contrast-to-noise", number_text(g.contrast_to_noise, 3));
  facts.facts.emplace_back("Blur (Gaussian σ)", number_text(g.blur_voxel, 3) + " voxel, " +
                                                    number_text(g.blur_mm, 3) + " mm" +
                                                    (g.blur_measured ? "" : ", assumed: no sound edges"));
  facts.facts.emplace_back(
      "Level over the part",
      "varies by " + number_text(in.material_level_spread_percent, 3) + " % of the contrast");
  return facts;
}

FactsBlock part_facts(const Inspection& in) {
  FactsBlock facts;
  facts.facts.emplace_back(
      "Material volume",
      measured_text(in.part_volume_mm3.value, 2 * in.part_volume_mm3.standard_uncertainty, "mm³") +
          " (k = 2)");
  facts.facts.emplace_back("Surface area", number_text(in.surface_area_mm2, 5) + " mm²");
  const Vec3 size = in.part_max_mm - in.part_min_mm;
  facts.facts.emplace_back("Extent",
                           times({number_text(size[0]), number_text(size[1]), number_text(size[2])}) + " mm");
  if (in.bodies.size() > 1)
    facts.facts.emplace_back("Bodies in the scan", std::to_string(in.bodies.size()) + "; body " +
                                                       std::to_string(in.body) + " was inspected");
  if (!in.has_outside) facts.facts.emplace_back("Outside", "the part fills the field of view");
  if (in.part_cut_by_field)
    facts.facts.emplace_back("Border", "the part reaches the border of the field of view");
  return facts;
}

FactsBlock setting_facts(const Inspection& in) {
  FactsBlock facts;
  facts.facts.emplace_back("Program", std::string(program_name()) + " " + program_version());
  facts.facts.emplace_back("Spec", one_line(file_name_of(in.spec.file.string())));
  if (!in.spec.sha256.empty()) facts.facts.emplace_back("Spec SHA-256", one_line(in.spec.sha256));
  for (const auto& [key, value] : in.settings) facts.facts.emplace_back(plain_name(key), one_line(value));
  return facts;
}

}  // namespace

Section method_section(const Inspection& in, const ReportFigures& figures) {
  Section section{"How it was measured", {}};
  section.blocks.push_back(SubheadingBlock{"Volume", {}});
  section.blocks.push_back(volume_facts(in));
  section.blocks.push_back(SubheadingBlock{"Grey values", {}});
  section.blocks.push_back(level_facts(in));
  if (!figures.grey_values.picture.empty())
    section.blocks.push_back(FigureBlock{{figures.grey_values}, {0.8}});
  section.blocks.push_back(SubheadingBlock{"Part", {}});
  section.blocks.push_back(part_facts(in));
  section.blocks.push_back(SubheadingBlock{"Settings", {}});
  section.blocks.push_back(setting_facts(in));
  return section;
}

}  // namespace halfmark
