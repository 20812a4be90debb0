#include "reports/program_text.h"

namespace halfmark {

const char* program_name() { return "Halfmark"; }
const char* program_version() { return HALFMARK_VERSION; }

}  // namespace halfmark
