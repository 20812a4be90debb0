#include <CLI/CLI.hpp>
#include <cstdio>

#include "cli/commands.h"
#include "io/inspection_spec.h"
#include "io/problem.h"
#include "io/spec_schema.h"

namespace halfmark {

Command add_spec_check(CLI::App& app) {
  auto file = std::make_shared<std::string>();
  app.add_option("SPEC", *file, "the spec, a JSON file")->required();
  return [file] {
    const InspectionSpec spec = read_spec(*file);
    std::printf("%s: sound; %zu requirement%s, %zu zone%s\n", file->c_str(), spec.requirements.size(),
                spec.requirements.size() == 1 ? "" : "s", spec.zones.size(),
                spec.zones.size() == 1 ? "" : "s");
    return 0;
  };
}

Command add_spec_schema(CLI::App&) {
  return [] {
    std::fputs(spec_schema_text(), stdout);
    return 0;
  };
}

}  // namespace halfmark
