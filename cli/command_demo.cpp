#include <CLI/CLI.hpp>
#include <cstdio>

#include "cli/commands.h"
#include "cli/terminal.h"
#include "demo_volumes/demo_part.h"

namespace halfmark {

Command add_demo(CLI::App& app) {
  struct Arguments {
    std::string name, folder;
    DemoOptions options;
    bool list = false, quiet = false;
  };
  auto arguments = std::make_shared<Arguments>();
  app.add_option("NAME", arguments->name, "which demo part; see --list");
  app.add_option("--out", arguments->folder,
                 "the folder to write NAME.mha, NAME.spec.json and NAME.truth.json to");
  app.add_option("--scale", arguments->options.scale, "this many times as many voxels per mm, 1 to 16");
  app.add_option("--edge", arguments->options.edge_voxels, "edge of the casting's volume, 64 to 4096 voxels");
  app.add_flag("--list", arguments->list, "list the demo parts");
  app.add_flag("--quiet", arguments->quiet, "no progress");
  return [arguments] {
    if (arguments->list) {
      for (const std::string& name : demo_names())
        std::printf("%-14s %s\n", name.c_str(), demo_sentence(name).c_str());
      return 0;
    }
    if (arguments->name.empty())
      throw Problem(ExitStatus::usage, "demo: name a part; see halfmark demo --list");
    if (arguments->folder.empty())
      throw Problem(ExitStatus::usage, "demo: say where to write with --out DIR");
    const RunControl control = terminal_control(arguments->quiet);
    write_demo(demo_part(arguments->name, arguments->options), arguments->folder, control);
    end_progress();
    std::printf("%s/%s.mha, .spec.json, .truth.json\n", arguments->folder.c_str(), arguments->name.c_str());
    return 0;
  };
}

}  // namespace halfmark
