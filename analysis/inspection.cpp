#include "analysis/inspection.h"

#include <tbb/global_control.h>

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <string_view>

#include "analysis/material_level.h"
#include "analysis/pore_shape.h"
#include "analysis/requirement_measures.h"
#include "analysis/surface.h"
#include "analysis/verdict.h"
#include "analysis/zones.h"

namespace halfmark {

namespace {

// Runs one step and says in which step a problem arose.
template <class F>
auto in_step(const char* name, F&& step) {
  try {
    return step();
  } catch (const Problem& problem) {
    const std::string prefix = std::string(name) + ":";
    const bool named = std::string_view(problem.what()).substr(0, prefix.size()) == prefix;
    if (named || problem.status() == ExitStatus::interrupted) throw;
    throw problem.within(name);
  }
}

const char* name_of(VoxelType type) {
  switch (type) {
    case VoxelType::u8:
      return "8-bit unsigned";
    case VoxelType::i8:
      return "8-bit signed";
    case VoxelType::u16:
      return "16-bit unsigned";
    case VoxelType::i16:
      return "16-bit signed";
    case VoxelType::f32:
      break;
  }
  return "32-bit float";
}

bool any_of_quantity(const InspectionSpec& spec, std::initializer_list<Quantity> quantities) {
  return std::any_of(spec.requirements.begin(), spec.requirements.end(), [&](const Requirement& r) {
    return std::find(quantities.begin(), quantities.end(), r.quantity) != quantities.end();
  });
}

VolumeText describe_volume(const OpenedVolume& volume, const FieldOfView& field,
                           const InspectOptions& options) {
  VolumeText text;
  text.file = volume.path.filename().string();
  text.format = volume.format;
  text.sha256 = options.volume_sha256;
  text.voxel_type = name_of(volume.source->voxel_type());
  text.geometry = volume.source->geometry();
  text.scan = volume.scan;
  text.field_share = static_cast<double>(field.voxels) / static_cast<double>(text.geometry.voxel_count());
  return text;
}

void apply_dispositions(std::vector<Pore>& pores, const std::vector<Disposition>& dispositions,
                        std::vector<std::string>& warnings) {
  for (const Disposition& disposition : dispositions) {
    Pore* nearest = nullptr;
    double least = std::max(disposition.tolerance_mm, 0.0);
    for (Pore& pore : pores) {
      const double d = length(pore.centre_mm - disposition.position_mm);
      if (d <= least) {
        least = d;
        nearest = &pore;
      }
    }
    if (nearest == nullptr) {
      warnings.push_back("an exclusion by " + disposition.by + " (" + disposition.reason +
                         ") matches no pore of this run");
    } else {
      nearest->disposition = disposition.reason + " (" + disposition.by + ", " + disposition.when + ")";
    }
  }
}

void copy_part(Inspection& out, const InspectionRun& run, const VolumeGeometry& geometry) {
  const PartMap& part = run.part;
  out.bodies = part.bodies;
  out.body = part.body;
  out.has_outside = part.has_outside;
  out.part_cut_by_field = part.cut_by_field;
  out.part_min_mm = part.bodies[static_cast<std::size_t>(part.body - 1)].min_mm;
  out.part_max_mm = part.bodies[static_cast<std::size_t>(part.body - 1)].max_mm;
  out.surface_area_mm2 = surface_area_mm2(run.surface);
  out.part_volume_mm3.value = enclosed_volume_mm3(run.surface);
  // A shift of the threshold by its uncertainty moves the whole surface by u / edge slope (slope of a
  // Gaussian edge at its middle: contrast / (blur sqrt(2 pi))).
  const GreyLevels& levels = out.grey_levels;
  const double blur_mm = std::hypot(levels.blur_mm, geometry.voxel_mm() / std::sqrt(12.0));
  const double shift_mm =
      levels.threshold_standard_uncertainty / levels.contrast() * blur_mm * std::sqrt(2 * 3.14159265358979);
  out.part_volume_mm3.standard_uncertainty = out.surface_area_mm2 * shift_mm;
  out.part_volume_mm3.contributions = {{"threshold", out.part_volume_mm3.standard_uncertainty}};
}

void say_what_was_not_searched(Inspection& out) {
  const double smallest = out.pore_summary.smallest_expected_diameter_mm;
  if (out.spec.pores.method == PoreMethod::local && smallest > 0) {
    char text[200];
    std::snprintf(text, sizeof text,
                  "Pores below about %.3g mm diameter: blur and noise of this scan hide them (estimate; not "
                  "demonstrated).",
                  smallest);
    out.not_searched.emplace_back(text);
  }
  out.not_searched.emplace_back(
      "Flat voids thinner than one voxel (tight cracks, cold shuts, lack of fusion): they may leave no trace "
      "in the grey values.");
  if (!out.spec.pores.inclusions)
    out.not_searched.emplace_back("Inclusions: not asked for (pores.inclusions).");
  if (!out.walls) out.not_searched.emplace_back("Wall thickness: no requirement asks for it.");
  if (out.part_cut_by_field) out.not_searched.emplace_back("The part beyond the field of view.");
  if (out.bodies.size() > 1)
    out.not_searched.emplace_back("Bodies other than body " + std::to_string(out.body) + " of this volume.");
}

std::map<std::string, std::string> settings_text(const InspectionSpec& spec) {
  const auto number = [](double value) {
    char text[40];
    std::snprintf(text, sizeof text, "%.6g", value);
    return std::string(text);
  };
  std::map<std::string, std::string> out;
  out["surface method"] = "iso50";
  out["pore method"] = spec.pores.method == PoreMethod::local ? "local" : "iso50";
  out["smallest pore listed, label voxels"] = std::to_string(spec.pores.min_voxels);
  out["closing radius of open pores, mm"] = number(spec.pores.open_closing_radius_mm);
  out["least depth of open pores, mm"] = number(spec.pores.open_min_depth_mm);
  out["inclusions searched"] = spec.pores.inclusions ? "yes" : "no";
  out["wall method"] = "inscribed_sphere";
  out["wall thickness measured up to, mm"] = number(spec.walls.max_mm);
  out["wall patch, mm²"] = number(spec.walls.patch_mm2);
  out["decision rule"] = spec.decision.rule == DecisionRule::guarded ? "guarded" : "simple";
  out["coverage factor"] = number(coverage_factor(spec.decision));
  return out;
}

double thinnest_wall_limit(const InspectionSpec& spec) {
  double limit = 0;
  for (const Requirement& r : spec.requirements) {
    if (r.quantity == Quantity::wall_thickness && r.min) limit = std::max(limit, *r.min);
  }
  return limit;
}

template <class T>
void add_all(std::vector<T>& to, const std::vector<T>& from) {
  to.insert(to.end(), from.begin(), from.end());
}

}  // namespace

InspectionRun inspect(const OpenedVolume& volume, const InspectionSpec& asked, const InspectOptions& options,
                      const RunControl& control) {
  std::optional<tbb::global_control> threads;
  if (options.threads > 0)
    threads.emplace(tbb::global_control::max_allowed_parallelism, static_cast<std::size_t>(options.threads));
  const VolumeSource& source = *volume.source;
  const VolumeGeometry& geometry = source.geometry();
  if (!volume.has_voxel_size) {
    throw Problem(
        ExitStatus::bad_data,
        "the volume tells no voxel size, without which nothing can be measured; give it with --voxel-size "
        "(mm)");
  }
  InspectionRun run;
  Inspection& out = run.inspection;
  InspectionSpec spec = asked;
  // Who limits inclusions wants them searched for.
  spec.pores.inclusions = spec.pores.inclusions ||
                          any_of_quantity(spec, {Quantity::inclusion_diameter, Quantity::inclusion_count});
  out.spec = spec;
  out.serial = options.serial;

  run.field = in_step("field of view", [&] { return find_field_of_view(source, control); });
  out.volume = describe_volume(volume, run.field, options);
  out.grey_levels =
      in_step("grey levels", [&] { return find_grey_levels(source, run.field, spec.grey_levels, control); });
  const PartOptions part_options{spec.pores.open_closing_radius_mm, spec.pores.open_min_depth_mm,
                                 options.body};
  run.part =
      in_step("part", [&] { return find_part(source, run.field, out.grey_levels, part_options, control); });
  const ZoneSet zones = in_step("zones", [&] { return ZoneSet(spec, geometry, run.part, control); });

  const MaterialLevel level = in_step("material level", [&] {
    return fit_material_level(source, run.field, out.grey_levels, run.part, control);
  });
  out.material_level_spread_percent = level.spread_percent;
  run.found = in_step("pores", [&] {
    return segment_pores(source, run.field, out.grey_levels, run.part, level, spec.pores, control);
  });
  in_step("pores", [&] { describe_pores(run.found, geometry, run.part, out.grey_levels, control); });
  assign_zones(run.found.pores, zones);
  apply_dispositions(run.found.pores, options.dispositions, out.warnings);

  run.surface = in_step(
      "surface", [&] { return extract_surface(source, run.field, out.grey_levels, run.part, {}, control); });
  copy_part(out, run, geometry);
  if (any_of_quantity(spec, {Quantity::wall_thickness})) {
    SurfaceOptions filled;
    filled.fill_pores = !spec.walls.pores_split_walls;
    run.outer_surface = in_step("walls", [&] {
      return extract_surface(source, run.field, out.grey_levels, run.part, filled, control);
    });
    run.walls = in_step("walls", [&] {
      return measure_walls(run.outer_surface, geometry, run.part, out.grey_levels, spec.walls, control);
    });
    out.walls = summarise_walls(run.outer_surface, *run.walls, spec.walls, {}, thinnest_wall_limit(spec));
  }

  MeasuredPart measured{geometry, out.grey_levels, run.part, run.found};
  measured.surface = &run.surface;
  if (run.walls) {
    measured.outer_surface = &run.outer_surface;
    measured.walls = &*run.walls;
  }
  if (spec.pores.method == PoreMethod::local) {
    measured.smallest_expected_diameter_mm =
        smallest_expected_diameter_mm(run.found, out.grey_levels, geometry.voxel_mm());
  }
  for (const Requirement& requirement : spec.requirements) {
    control.throw_if_cancelled();
    out.requirements.push_back(in_step(
        "requirements", [&] { return measure_requirement(requirement, spec, zones, measured, control); }));
    judge(out.requirements.back(), spec.decision);
  }
  out.pore_summary = summarise_pores(measured, zones);
  out.pore_summary.smallest_expected_diameter_mm = measured.smallest_expected_diameter_mm;
  judge_pores(run.found.pores, out.requirements, spec.decision);
  std::copy_if(run.found.pores.begin(), run.found.pores.end(), std::back_inserter(out.pores),
               [](const Pore& p) { return !p.left_out; });
  out.verdict = overall_verdict(out.requirements);

  out.settings = settings_text(spec);
  add_all(out.warnings, out.grey_levels.warnings);
  add_all(out.warnings, run.part.warnings);
  add_all(out.warnings, level.warnings);
  add_all(out.warnings, run.found.warnings);
  if (run.walls) add_all(out.warnings, run.walls->warnings);
  say_what_was_not_searched(out);
  return run;
}

}  // namespace halfmark
