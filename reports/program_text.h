// The program's own name and version, as results carry them.
#pragma once

namespace halfmark {

const char* program_name();     // "Halfmark"
const char* program_version();  // "0.1.0"

}  // namespace halfmark
