// The report's account of how it was measured: what another laboratory needs to repeat it.
#pragma once

#include "reports/report_content.h"

namespace halfmark {

Section method_section(const Inspection& inspection, const ReportFigures& figures);

}  // namespace halfmark
