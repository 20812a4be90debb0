#include "cli/volume_options.h"

#include <CLI/CLI.hpp>
#include <cmath>
#include <sstream>
#include <vector>

namespace halfmark {

void add_volume_options(CLI::App& command, VolumeArguments& arguments) {
  command.add_option("VOLUME", arguments.path, "the volume: a file, or a folder of slices")->required();
  command.add_option("--voxel-size", arguments.voxel_size,
                     "voxel size in mm, one number or x,y,z; overrides the file's");
}

std::optional<Vec3> parse_voxel_size(const std::string& text) {
  if (text.empty()) return std::nullopt;
  std::vector<double> numbers;
  std::istringstream parts(text);
  parts.imbue(std::locale::classic());
  for (std::string part; std::getline(parts, part, ',');) {
    std::istringstream in(part);
    in.imbue(std::locale::classic());
    double value = 0;
    const bool sound = static_cast<bool>(in >> value) && in.eof() && std::isfinite(value) && value > 0;
    if (!sound)
      throw Problem(ExitStatus::usage,
                    "--voxel-size: '" + part + "' is not a size in mm; write 0.05 or 0.05,0.05,0.1");
    numbers.push_back(value);
  }
  if (numbers.size() == 1) return Vec3{numbers[0], numbers[0], numbers[0]};
  if (numbers.size() == 3 && text.back() != ',') return Vec3{numbers[0], numbers[1], numbers[2]};
  throw Problem(ExitStatus::usage, "--voxel-size: one number or three with commas between, in mm");
}

OpenedVolume open_from(const VolumeArguments& arguments, const RunControl& control) {
  OpenOptions options;
  options.voxel_size_mm = parse_voxel_size(arguments.voxel_size);
  options.control = control;
  return open_volume(arguments.path, options);
}

}  // namespace halfmark
