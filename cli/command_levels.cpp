#include <CLI/CLI.hpp>
#include <cstdio>
#include <nlohmann/json.hpp>
#include <optional>

#include "analysis/field_of_view.h"
#include "analysis/grey_levels.h"
#include "cli/commands.h"
#include "cli/terminal.h"
#include "cli/volume_options.h"

namespace halfmark {

namespace {

void print_table(const OpenedVolume& volume, const FieldOfView& field, const GreyLevels& levels) {
  const VolumeGeometry& g = volume.source->geometry();
  std::printf("volume             %lld x %lld x %lld voxels, %s\n", static_cast<long long>(g.size[0]),
              static_cast<long long>(g.size[1]), static_cast<long long>(g.size[2]), volume.format.c_str());
  std::printf("voxel size         %.6g x %.6g x %.6g mm%s\n", g.spacing_mm[0], g.spacing_mm[1],
              g.spacing_mm[2], volume.has_voxel_size ? "" : " (not told by the file: assumed)");
  if (!field.whole()) {
    std::printf("field of view      %.1f %% of the voxels; padding of grey %.6g left out\n",
                100.0 * static_cast<double>(field.voxels) / static_cast<double>(g.voxel_count()),
                *field.padding_grey);
  }
  std::printf("air                %.6g grey, noise %.4g\n", levels.air, levels.air_noise);
  std::printf("material           %.6g grey, noise %.4g\n", levels.material, levels.material_noise);
  std::printf("ISO-50 threshold   %.6g grey, standard uncertainty %.2g\n", levels.threshold,
              levels.threshold_standard_uncertainty);
  std::printf("levels from        %s\n", levels.source.c_str());
  std::printf("contrast-to-noise  %.3g\n", levels.contrast_to_noise);
  std::printf(
      "blur               %.3g voxel = %.4g mm (standard deviation of the Gaussian beside voxel "
      "averaging)%s\n",
      levels.blur_voxel, levels.blur_mm,
      levels.blur_measured ? "" : ", assumed: no sound edge to measure it on");
  std::printf("noise              %s; correlation with the next voxel along x %.2f, y %.2f, z %.2f\n",
              levels.noise_is_white ? "white" : "correlated", levels.noise_correlation[0],
              levels.noise_correlation[1], levels.noise_correlation[2]);
  for (const double peak : levels.other_peaks) std::printf("further peak       %.6g grey\n", peak);
  for (const std::string& warning : levels.warnings) std::printf("note: %s\n", warning.c_str());
}

nlohmann::ordered_json as_json(const OpenedVolume& volume, const FieldOfView& field,
                               const GreyLevels& levels) {
  const VolumeGeometry& g = volume.source->geometry();
  nlohmann::ordered_json out;
  out["size"] = g.size;
  out["voxel_mm"] = g.spacing_mm;
  out["voxel_size_known"] = volume.has_voxel_size;
  out["field_share"] = static_cast<double>(field.voxels) / static_cast<double>(g.voxel_count());
  out["air"] = levels.air;
  out["material"] = levels.material;
  out["threshold"] = levels.threshold;
  out["threshold_standard_uncertainty"] = levels.threshold_standard_uncertainty;
  out["air_noise"] = levels.air_noise;
  out["material_noise"] = levels.material_noise;
  out["contrast_to_noise"] = levels.contrast_to_noise;
  out["blur_voxel"] = levels.blur_voxel;
  out["blur_mm"] = levels.blur_mm;
  out["blur_measured"] = levels.blur_measured;
  out["noise_correlation"] = levels.noise_correlation;
  out["noise_is_white"] = levels.noise_is_white;
  out["source"] = levels.source;
  out["other_peaks"] = levels.other_peaks;
  out["warnings"] = levels.warnings;
  return out;
}

}  // namespace

Command add_levels(CLI::App& app) {
  struct Arguments {
    VolumeArguments volume;
    bool json = false, quiet = false;
  };
  auto arguments = std::make_shared<Arguments>();
  add_volume_options(app, arguments->volume);
  app.add_flag("--json", arguments->json, "print JSON");
  app.add_flag("--quiet", arguments->quiet, "no progress");
  return [arguments] {
    const RunControl control = terminal_control(arguments->quiet);
    const OpenedVolume volume = open_from(arguments->volume, control);
    const FieldOfView field = find_field_of_view(*volume.source, control);
    const GreyLevels levels = find_grey_levels(*volume.source, field, {}, control);
    end_progress();
    if (arguments->json) {
      std::printf("%s\n", as_json(volume, field, levels)
                              .dump(2, ' ', false, nlohmann::ordered_json::error_handler_t::replace)
                              .c_str());
    } else {
      print_table(volume, field, levels);
    }
    return 0;
  };
}

}  // namespace halfmark
