// report.html: one file that needs nothing else, the same bytes for the same content. All text is escaped.
#pragma once

#include <string>

#include "reports/report_content.h"

namespace halfmark {

std::string report_to_html(const ReportContent& content);
// & < > " ' as entities; bytes that are not UTF-8 become U+FFFD.
std::string html_escaped(const std::string& text);

}  // namespace halfmark
