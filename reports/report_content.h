// What a report says, in order, without its looks: report_html.h and report_pdf.h show the same content.
#pragma once

#include <optional>
#include <string>
#include <utility>
#include <variant>
#include <vector>

#include "analysis/inspection.h"
#include "reports/figures.h"

namespace halfmark {

struct Cell {
  std::string text, note;          // the note stands under the text, smaller
  std::optional<Verdict> verdict;  // shown by sign, colour and word
  bool number = false;             // set to the right
};

struct TextBlock {
  std::string text;
};
struct ListBlock {
  std::vector<std::string> items;
};
struct FactsBlock {
  std::vector<std::pair<std::string, std::string>> facts;  // name, value
  bool in_two_columns = false;                             // short facts, read down the left column first
};
struct TableBlock {
  std::vector<Cell> header;
  std::vector<std::vector<Cell>> rows;
  std::vector<double> shares;  // of the width, one a column
  std::vector<std::string>
      notes;  // one a row or none at all: a sentence under the row from its second column on
};
struct FigureBlock {
  std::vector<Figure> figures;  // side by side
  std::vector<double> shares;   // of the width
};
struct SubheadingBlock {
  std::string text;
  std::optional<Verdict> verdict;
};
struct SignatureBlock {
  std::vector<std::string> lines;  // what is to be written on each
};
using Block =
    std::variant<TextBlock, ListBlock, FactsBlock, TableBlock, FigureBlock, SubheadingBlock, SignatureBlock>;

struct Section {
  std::string heading;
  std::vector<Block> blocks;
};

struct ReportContent {
  Verdict verdict = Verdict::undecided;
  std::string title;    // the spec's
  std::string subject;  // part, drawing, revision
  std::string serial;
  std::string sentence;  // how the verdict comes about
  std::string program;   // "Halfmark 0.1.0"
  std::vector<Section> sections;
};

// date: shown when not empty.
ReportContent report_content(const InspectionRun& run, const ReportFigures& figures,
                             const std::string& date = "");

}  // namespace halfmark
