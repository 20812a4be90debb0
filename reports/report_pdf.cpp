#include "reports/report_pdf.h"

#include <QBuffer>
#include <QPageSize>
#include <algorithm>

#include "analysis/number_text.h"
#include "reports/canvas.h"
#include "reports/page_flow.h"

namespace halfmark {

namespace {

const TextStyle body{9.2, false, ink, 1.42}, soft{9.2, false, soft_ink, 1.42};
const TextStyle small{7.8, false, soft_ink, 1.35}, table_text{8.2, false, ink, 1.35},
    table_head{7.8, true, soft_ink, 1.3};
constexpr int resolution = 600;
constexpr double gap = 12, cell_gap = 7;
// A picture is no taller than this, so that its words stay on its page.
constexpr double tallest_picture = 240;

class PdfReport {
 public:
  PdfReport(PageFlow& flow, const RunControl& control) : flow_(flow), control_(control) {}

  void head(const ReportContent& c) {
    const double y = flow_.y();
    paint_verdict_sign(flow_.painter(), flow_.device(PageFlow::left + 28), flow_.device(y + 32),
                       flow_.device(54), c.verdict);
    const double x = PageFlow::left + 74, width = PageFlow::width - 74;
    flow_.paint_text(x, y, width, c.title, {10, false, soft_ink, 1.3});
    double at = y + std::max(13.0, flow_.text_height(c.title, {10, false, soft_ink, 1.3}, width));
    flow_.paint_text(x, at, width, capitalised(to_text(c.verdict)),
                     {25, true, verdict_line_colour(c.verdict), 1.25});
    at += 32;
    flow_.paint_text(x, at, width, c.sentence, {10.5, false, ink, 1.35});
    at += flow_.text_height(c.sentence, {10.5, false, ink, 1.35}, width);
    flow_.skip(std::max(70.0, at - y + 6));
  }

  void section(const Section& s) {
    control_.throw_if_cancelled();
    flow_.need(16 + 26 + lead_height(s.blocks, 0));
    flow_.skip(16);
    flow_.rule(PageFlow::left, PageFlow::left + PageFlow::width, flow_.y(), 1.2, ink);
    flow_.skip(6);
    flow_.paragraph(s.heading, {12, true, ink, 1.4});
    flow_.skip(3);
    for (std::size_t i = 0; i < s.blocks.size(); ++i) {
      if (std::holds_alternative<SubheadingBlock>(s.blocks[i])) flow_.need(lead_height(s.blocks, i));
      std::visit([this](const auto& b) { write(b); }, s.blocks[i]);
    }
  }

 private:
  // What must stand on one page from block i on: headings and words stay with the picture or table that
  // follows.
  double lead_height(const std::vector<Block>& blocks, std::size_t i) {
    double height = 0;
    for (; i < blocks.size(); ++i) {
      if (const auto* text = std::get_if<TextBlock>(&blocks[i])) {
        height += flow_.text_height(text->text, body, PageFlow::width) + 5;
      } else if (std::holds_alternative<SubheadingBlock>(blocks[i])) {
        if (height > 60) break;
        height += 26;
      } else if (const auto* figure = std::get_if<FigureBlock>(&blocks[i])) {
        height += layout(*figure).height + 10;
        break;
      } else {
        height += 70;
        break;
      }
    }
    return std::min(height, PageFlow::page_height - PageFlow::top - PageFlow::bottom - 60);
  }
  void write(const TextBlock& b) {
    flow_.paragraph(b.text, body);
    flow_.skip(5);
  }
  void write(const ListBlock& b) {
    for (const std::string& item : b.items) {
      flow_.need(body.size * body.leading);
      flow_.paint_text(PageFlow::left, flow_.y(), 10, "•", soft);
      flow_.paragraph(item, body, 12);
      flow_.skip(2);
    }
    flow_.skip(4);
  }
  void write(const FactsBlock& b) {
    const std::size_t columns = b.in_two_columns ? 2 : 1, rows = (b.facts.size() + columns - 1) / columns;
    const double column =
        (PageFlow::width - gap * static_cast<double>(columns - 1)) / static_cast<double>(columns);
    const double name_width = columns == 2 ? 88 : 118;
    for (std::size_t row = 0; row < rows; ++row) {
      double height = 0;
      for (std::size_t i = row; i < b.facts.size(); i += rows)
        height = std::max({height, flow_.text_height(b.facts[i].first, soft, name_width - 8),
                           flow_.text_height(b.facts[i].second, body, column - name_width)});
      flow_.need(height);
      double x = PageFlow::left;
      for (std::size_t i = row; i < b.facts.size(); i += rows) {
        flow_.paint_text(x, flow_.y(), name_width - 8, b.facts[i].first, soft);
        flow_.paint_text(x + name_width, flow_.y(), column - name_width, b.facts[i].second, body);
        x += column + gap;
      }
      flow_.skip(height + 1.5);
    }
    flow_.skip(4);
  }
  void write(const TableBlock& b) {
    header(b);
    for (std::size_t i = 0; i < b.rows.size(); ++i) {
      const double height = row_height(b, i);
      if (flow_.y() + height > PageFlow::page_height - PageFlow::bottom) {
        flow_.need(PageFlow::page_height);
        header(b);
      }
      paint_row(b, i);
      flow_.skip(height);
      flow_.rule(PageFlow::left, PageFlow::left + PageFlow::width, flow_.y(), 0.4, rule_grey);
    }
    flow_.skip(7);
  }
  void header(const TableBlock& b) {
    double height = 0;
    for (std::size_t i = 0; i < b.header.size(); ++i)
      height = std::max(height, flow_.text_height(b.header[i].text, table_head, column_width(b, i)));
    flow_.need(height + 40);
    double x = PageFlow::left;
    for (std::size_t i = 0; i < b.header.size(); ++i) {
      const double own = flow_.text_height(b.header[i].text, table_head, column_width(b, i));
      flow_.paint_text(x, flow_.y() + height - own, column_width(b, i), b.header[i].text, table_head,
                       side(b.header[i]));
      x += b.shares[i] * PageFlow::width;
    }
    flow_.skip(height + 3);
    flow_.rule(PageFlow::left, PageFlow::left + PageFlow::width, flow_.y(), 0.9, ink);
    flow_.skip(0.9);
  }
  static Qt::Alignment side(const Cell& cell) { return cell.number ? Qt::AlignRight : Qt::AlignLeft; }
  static double column_width(const TableBlock& b, std::size_t i) {
    return b.shares[i] * PageFlow::width - (i + 1 < b.shares.size() ? cell_gap : 0);
  }
  static std::string note_of(const TableBlock& b, std::size_t row) {
    return row < b.notes.size() ? b.notes[row] : "";
  }
  static double note_width(const TableBlock& b) { return (1 - b.shares[0]) * PageFlow::width; }
  double cells_height(const TableBlock& b, const std::vector<Cell>& row) {
    double height = 0;
    for (std::size_t i = 0; i < row.size(); ++i) {
      double own = flow_.text_height(row[i].text, table_text, column_width(b, i) - (row[i].verdict ? 13 : 0));
      if (!row[i].note.empty()) own += flow_.text_height(row[i].note, small, column_width(b, i));
      height = std::max(height, own);
    }
    return height;
  }
  double row_height(const TableBlock& b, std::size_t row) {
    const std::string note = note_of(b, row);
    return cells_height(b, b.rows[row]) + (note.empty() ? 0 : flow_.text_height(note, small, note_width(b))) +
           7;
  }
  void paint_row(const TableBlock& b, std::size_t index) {
    const std::vector<Cell>& row = b.rows[index];
    double x = PageFlow::left;
    const double y = flow_.y() + 3.5;
    for (std::size_t i = 0; i < row.size(); ++i) {
      const Cell& cell = row[i];
      const double width = column_width(b, i);
      TextStyle style = table_text;
      if (cell.verdict) {
        paint_verdict_sign(flow_.painter(), flow_.device(x + 4.5), flow_.device(y + 5.6), flow_.device(9),
                           *cell.verdict);
        style.bold = true;
        flow_.paint_text(x + 13, y, width - 13, cell.text, style);
      } else {
        flow_.paint_text(x, y, width, cell.text, style, side(cell));
        if (!cell.note.empty())
          flow_.paint_text(x, y + flow_.text_height(cell.text, style, width), width, cell.note, small);
      }
      x += b.shares[i] * PageFlow::width;
    }
    const std::string note = note_of(b, index);
    if (!note.empty())
      flow_.paint_text(PageFlow::left + b.shares[0] * PageFlow::width, y + cells_height(b, row),
                       note_width(b), note, small);
  }
  struct FigureLayout {
    double room, shrink, height;  // points, without the gap below
  };
  FigureLayout layout(const FigureBlock& b) {
    FigureLayout l{PageFlow::width - gap * static_cast<double>(b.figures.size() - 1), 1, 0};
    double tallest = 0;
    for (std::size_t i = 0; i < b.figures.size(); ++i)
      tallest = std::max(tallest, picture_height(b, i, l.room));
    l.shrink = std::min(1.0, tallest_picture / tallest);
    for (std::size_t i = 0; i < b.figures.size(); ++i)
      l.height = std::max(
          l.height, picture_height(b, i, l.room) * l.shrink + 4 +
                        flow_.text_height(b.figures[i].caption, small, b.shares[i] * l.room * l.shrink));
    return l;
  }
  void write(const FigureBlock& b) {
    const FigureLayout l = layout(b);
    flow_.need(l.height);
    double x = PageFlow::left;
    for (std::size_t i = 0; i < b.figures.size(); ++i) {
      control_.throw_if_cancelled();
      const double width = b.shares[i] * l.room * l.shrink, own = picture_height(b, i, l.room) * l.shrink;
      flow_.image(x, flow_.y(), width, own, image_of(b.figures[i].picture));
      flow_.paint_text(x, flow_.y() + own + 4, width, b.figures[i].caption, small);
      x += width + gap;
    }
    flow_.skip(l.height + 10);
  }
  static double picture_height(const FigureBlock& b, std::size_t i, double room) {
    const Picture& p = b.figures[i].picture;
    return b.shares[i] * room * p.height / p.width;
  }
  void write(const SubheadingBlock& b) {
    flow_.skip(7);
    const double indent = b.verdict ? 15 : 0;
    if (b.verdict)
      paint_verdict_sign(flow_.painter(), flow_.device(PageFlow::left + 5), flow_.device(flow_.y() + 7),
                         flow_.device(10), *b.verdict);
    flow_.paragraph(b.text, {10, true, ink, 1.4}, indent);
    flow_.skip(2);
  }
  void write(const SignatureBlock& b) {
    flow_.need(64);
    flow_.skip(40);
    const double width = (PageFlow::width - 24 * static_cast<double>(b.lines.size() - 1)) /
                         static_cast<double>(b.lines.size());
    double x = PageFlow::left;
    for (const std::string& line : b.lines) {
      flow_.rule(x, x + width, flow_.y(), 0.7, ink);
      flow_.paint_text(x, flow_.y() + 3, width, line, small);
      x += width + 24;
    }
    flow_.skip(20);
  }

  PageFlow& flow_;
  const RunControl& control_;
};

// Text kept to one line of the head.
std::string shortened(const std::string& text, std::size_t most) {
  const QString all = qt_text(text);
  return static_cast<std::size_t>(all.size()) <= most
             ? text
             : (all.left(static_cast<int>(most)) + "…").toStdString();
}

void furniture(PageFlow& flow, int page, int pages, const ReportContent& c) {
  const double width = PageFlow::width;
  if (page > 1) {
    const std::string subject = shortened(c.subject, 70);
    const std::string serial = c.serial.empty() ? "" : ", serial " + shortened(c.serial, 40);
    flow.paint_text(PageFlow::left, 32, width - 90, subject + serial, small);
    paint_verdict_sign(flow.painter(), flow.device(PageFlow::left + width - 57), flow.device(37.5),
                       flow.device(8), c.verdict);
    flow.paint_text(PageFlow::left + width - 49, 32, 60, to_text(c.verdict), {7.8, true, ink, 1.35});
    flow.rule(PageFlow::left, PageFlow::left + width, 48, 0.4, rule_grey);
  }
  const double y = PageFlow::page_height - 40;
  flow.paint_text(PageFlow::left, y, width / 2, c.program, small);
  const std::string number = std::to_string(page) + (pages > 0 ? " of " + std::to_string(pages) : "");
  flow.paint_text(PageFlow::left + width / 2, y, width / 2, "Page " + number, small, Qt::AlignRight);
}

// Returns the number of pages.
int paint(const ReportContent& content, QByteArray& bytes, int pages, const RunControl& control) {
  QBuffer buffer(&bytes);
  buffer.open(QIODevice::WriteOnly);
  QPdfWriter writer(&buffer);
  writer.setResolution(resolution);
  writer.setPageSize(QPageSize(QPageSize::A4));
  writer.setPageMargins(QMarginsF(0, 0, 0, 0));
  writer.setTitle(qt_text(capitalised(to_text(content.verdict)) + ": " + content.subject));
  writer.setCreator(qt_text(content.program));
  PageFlow flow(writer, [&](PageFlow& f, int page) { furniture(f, page, pages, content); });
  PdfReport report(flow, control);
  report.head(content);
  for (const Section& section : content.sections) report.section(section);
  return flow.pages();
}

}  // namespace

std::string report_to_pdf(const ReportContent& content, const RunControl& control) {
  ensure_painting();
  // Laid out twice: the first time tells how many pages there are.
  QByteArray first, bytes;
  const int pages = paint(content, first, 0, control);
  paint(content, bytes, pages, control);
  return bytes.toStdString();
}

}  // namespace halfmark
