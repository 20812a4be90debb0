// report.pdf: the report on A4 pages, with page numbers and the serial number and verdict on each. Not the
// same bytes twice: the PDF writer stamps a date.
#pragma once

#include <string>

#include "reports/report_content.h"

namespace halfmark {

std::string report_to_pdf(const ReportContent& content, const RunControl& control = {});

}  // namespace halfmark
