// The options that every command with a volume takes.
#pragma once

#include <optional>
#include <string>

#include "io/volume_open.h"

namespace CLI {
class App;
}

namespace halfmark {

struct VolumeArguments {
  std::string path, voxel_size;
};

void add_volume_options(CLI::App& command, VolumeArguments& arguments);

// "0.05" or "0.05,0.05,0.1" in mm. Throws Problem(usage).
std::optional<Vec3> parse_voxel_size(const std::string& text);
OpenedVolume open_from(const VolumeArguments& arguments, const RunControl& control);

}  // namespace halfmark
