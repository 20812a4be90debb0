#include <CLI/CLI.hpp>
#include <cstdio>
#include <exception>
#include <new>
#include <utility>
#include <vector>

#include "cli/commands.h"
#include "cli/terminal.h"
#include "io/problem.h"

namespace {

using halfmark::ExitStatus;

int fail(ExitStatus status, const std::string& sentence) {
  halfmark::end_progress();
  std::fprintf(stderr, "halfmark: %s\n", sentence.c_str());
  return static_cast<int>(status);
}

constexpr const char* exit_statuses =
    "Exit status: 0 accept, 1 reject, 2 undecided, 64 wrong usage, 65 bad data or spec, 66 input missing,\n"
    "70 internal error, 73 cannot create output, 74 I/O error, 130 interrupted.";

}  // namespace

int main(int argc, char** argv) {
  CLI::App app("Measures pores and walls in X-ray CT volumes and compares them with an inspection spec.",
               "halfmark");
  app.footer(exit_statuses);
  app.set_version_flag("--version", "halfmark " HALFMARK_VERSION);
  app.require_subcommand(1);
  std::vector<std::pair<CLI::App*, halfmark::Command>> commands;
  const auto add = [&](CLI::App* command, halfmark::Command (*setup)(CLI::App&)) {
    commands.emplace_back(command, setup(*command));
  };
  add(app.add_subcommand("inspect", "inspect a volume against a spec: verdict, pore list, report"),
      halfmark::add_inspect);
  add(app.add_subcommand("levels",
                         "grey levels, threshold, noise and blur of a volume, and what looks wrong"),
      halfmark::add_levels);
  add(app.add_subcommand("demo", "write a demo volume with its spec and its truth"), halfmark::add_demo);
  add(app.add_subcommand("convert", "convert between volume formats"), halfmark::add_convert);
  CLI::App* spec = app.add_subcommand("spec", "work with inspection specs");
  spec->require_subcommand(1);
  add(spec->add_subcommand("check", "validate a spec and name every problem by its place"),
      halfmark::add_spec_check);
  add(spec->add_subcommand("schema", "print the JSON Schema of inspection specs"), halfmark::add_spec_schema);

  try {
    app.parse(argc, argv);
  } catch (const CLI::Success& asked) {
    return app.exit(asked);  // --help, --version
  } catch (const CLI::ParseError& error) {
    return fail(ExitStatus::usage, std::string(error.what()) + "; see halfmark --help");
  }
  try {
    for (const auto& [command, run] : commands) {
      if (command->parsed()) {
        const int status = run();
        halfmark::end_progress();
        if (std::fflush(stdout) != 0) return fail(ExitStatus::io_error, "cannot write to standard output");
        return status;
      }
    }
    return fail(ExitStatus::usage, "no command; see halfmark --help");
  } catch (const halfmark::Problem& problem) {
    return fail(problem.status(), problem.what());
  } catch (const std::bad_alloc&) {
    return fail(ExitStatus::io_error, "not enough memory for this volume");
  } catch (const std::exception& error) {
    return fail(ExitStatus::internal, std::string("internal error: ") + error.what());
  }
}
