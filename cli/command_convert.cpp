#include <CLI/CLI.hpp>
#include <filesystem>

#include "cli/commands.h"
#include "cli/terminal.h"
#include "cli/volume_options.h"

namespace halfmark {

Command add_convert(CLI::App& app) {
  struct Arguments {
    VolumeArguments volume;
    std::string out;
    bool quiet = false;
  };
  auto arguments = std::make_shared<Arguments>();
  add_volume_options(app, arguments->volume);
  app.add_option("OUT", arguments->out,
                 "the file to write; its ending chooses the format: .mha .mhd .nrrd .nhdr .tif .raw .vti "
                 ".nii .nii.gz")
      ->required();
  app.add_flag("--quiet", arguments->quiet, "no progress");
  return [arguments] {
    const RunControl control = terminal_control(arguments->quiet);
    const OpenedVolume volume = open_from(arguments->volume, control);
    std::error_code error;
    if (std::filesystem::equivalent(arguments->volume.path, arguments->out, error)) {
      throw Problem(ExitStatus::usage, arguments->out + ": is the input itself; choose another name");
    }
    write_volume(*volume.source, arguments->out, control);
    return 0;
  };
}

}  // namespace halfmark
