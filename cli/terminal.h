// What the command line shows and hears besides results: progress on stderr, Ctrl-C.
#pragma once

#include "io/run_control.h"

namespace halfmark {

// A control whose progress is drawn on stderr when that is a terminal and `quiet` is not set, and that Ctrl-C
// (SIGINT) and SIGTERM cancel from now on.
RunControl terminal_control(bool quiet);

// Removes the progress line.
void end_progress();

// True when stdout is a terminal and NO_COLOR is not set (no-color.org).
bool colour_wanted();

}  // namespace halfmark
