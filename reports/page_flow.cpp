#include "reports/page_flow.h"

#include <QTextLayout>

#include "io/problem.h"
#include "reports/canvas.h"

namespace halfmark {

PageFlow::PageFlow(QPdfWriter& writer, std::function<void(PageFlow&, int)> furniture)
    : writer_(writer), furniture_(std::move(furniture)), scale_(writer.resolution() / 72.0) {
  if (!painter_.begin(&writer_)) throw Problem(ExitStatus::internal, "report: the PDF cannot be painted");
  painter_.setRenderHint(QPainter::Antialiasing);
  // Grey values and thin lines keep their pixels.
  painter_.setRenderHint(QPainter::LosslessImageRendering);
  furniture_(*this, page_);
}

PageFlow::~PageFlow() { painter_.end(); }

void PageFlow::new_page() {
  writer_.newPage();
  ++page_;
  y_ = top;
  furniture_(*this, page_);
}

void PageFlow::need(double points) {
  if (y_ + points > page_height - bottom && y_ > top) new_page();
}

QFont PageFlow::font_of(const TextStyle& style) const { return text_font(device(style.size), style.bold); }

std::vector<QString> PageFlow::lines_of(const std::string& text, const TextStyle& style,
                                        double text_width) const {
  const QString all = qt_text(text);
  QTextLayout layout(all, font_of(style));
  QTextOption option;
  option.setWrapMode(QTextOption::WrapAtWordBoundaryOrAnywhere);
  layout.setTextOption(option);
  std::vector<QString> lines;
  layout.beginLayout();
  for (QTextLine line = layout.createLine(); line.isValid(); line = layout.createLine()) {
    line.setLineWidth(device(text_width));
    lines.push_back(all.mid(line.textStart(), line.textLength()).trimmed());
  }
  layout.endLayout();
  return lines;
}

double PageFlow::text_height(const std::string& text, const TextStyle& style, double text_width) const {
  return static_cast<double>(lines_of(text, style, text_width).size()) * style.size * style.leading;
}

void PageFlow::paint_text(double x, double y, double text_width, const std::string& text,
                          const TextStyle& style, Qt::Alignment alignment) {
  painter_.setFont(font_of(style));
  painter_.setPen(colour_of(style.colour));
  const double height = style.size * style.leading;
  for (const QString& line : lines_of(text, style, text_width)) {
    painter_.drawText(QRectF(device(x), device(y), device(text_width), device(height)),
                      static_cast<int>(alignment | Qt::AlignVCenter | Qt::TextDontClip), line);
    y += height;
  }
}

void PageFlow::paragraph(const std::string& text, const TextStyle& style, double indent) {
  const double height = style.size * style.leading;
  for (const QString& line : lines_of(text, style, width - indent)) {
    need(height);
    painter_.setFont(font_of(style));
    painter_.setPen(colour_of(style.colour));
    painter_.drawText(QRectF(device(left + indent), device(y_), device(width - indent), device(height)),
                      static_cast<int>(Qt::AlignLeft | Qt::AlignVCenter | Qt::TextDontClip), line);
    y_ += height;
  }
}

void PageFlow::rule(double x0, double x1, double y, double thickness, const Rgb& colour) {
  painter_.fillRect(QRectF(device(x0), device(y), device(x1 - x0), device(thickness)), colour_of(colour));
}

void PageFlow::image(double x, double y, double image_width, double image_height, const QImage& picture) {
  painter_.drawImage(QRectF(device(x), device(y), device(image_width), device(image_height)), picture);
}

}  // namespace halfmark
