// The commands of `halfmark`. Each adds its options to the command line and returns what runs it; running
// gives the exit status and throws Problem.
#pragma once

#include <functional>

namespace CLI {
class App;
}

namespace halfmark {

using Command = std::function<int()>;

Command add_inspect(CLI::App& app);
Command add_levels(CLI::App& app);
Command add_demo(CLI::App& app);
Command add_convert(CLI::App& app);
Command add_spec_check(CLI::App& app);  // these two of the group `spec`
Command add_spec_schema(CLI::App& app);

}  // namespace halfmark
