// Text, tables and pictures flow down A4 pages: a thin layer over QPainter and QPdfWriter. Lengths in points.
#pragma once

#include <QPainter>
#include <QPdfWriter>
#include <functional>
#include <string>
#include <vector>

#include "reports/colours.h"

namespace halfmark {

struct TextStyle {
  double size = 9.5;
  bool bold = false;
  Rgb colour = ink;
  double leading = 1.35;  // line height over size
};

class PageFlow {
 public:
  static constexpr double page_width = 595.28, page_height = 841.89;  // A4
  static constexpr double left = 51, right = 51, top = 62, bottom = 56;
  static constexpr double width = page_width - left - right;

  // `furniture` paints header and footer of a page, given its number from 1.
  PageFlow(QPdfWriter& writer, std::function<void(PageFlow&, int)> furniture);
  ~PageFlow();

  int pages() const { return page_; }
  double y() const { return y_; }
  void skip(double points) { y_ += points; }
  // Starts a new page unless `points` fit on this one.
  void need(double points);

  double text_height(const std::string& text, const TextStyle& style, double text_width) const;
  // Paints wrapped text with its top left corner at (x, y); nothing moves.
  void paint_text(double x, double y, double text_width, const std::string& text, const TextStyle& style,
                  Qt::Alignment alignment = Qt::AlignLeft);
  // A paragraph at the flow's place; goes on over the page's end line by line.
  void paragraph(const std::string& text, const TextStyle& style, double indent = 0);
  void rule(double x0, double x1, double y, double thickness, const Rgb& colour);
  void image(double x, double y, double image_width, double image_height, const QImage& picture);
  QPainter& painter() { return painter_; }
  double device(double points) const { return points * scale_; }

 private:
  std::vector<QString> lines_of(const std::string& text, const TextStyle& style, double text_width) const;
  QFont font_of(const TextStyle& style) const;
  void new_page();

  QPdfWriter& writer_;
  std::function<void(PageFlow&, int)> furniture_;
  QPainter painter_;
  double scale_, y_ = top;
  int page_ = 1;
};

}  // namespace halfmark
