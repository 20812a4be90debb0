#include "reports/chart_figure.h"

#include <algorithm>
#include <cmath>

#include "analysis/number_text.h"
#include "reports/canvas.h"

namespace halfmark {

namespace {

constexpr int chart_width = 1000;
constexpr double left = 96, right = 28;
constexpr Rgb bar{0x6b, 0x7c, 0x8a}, grid{0xe4, 0xe8, 0xea};
constexpr double letter = 17;
constexpr int least_classes = 10;

struct Plot {
  QRectF area;
  double low, high, top;  // x from low to high, y from 0 to top
  double x(double v) const { return area.left() + (v - low) / (high - low) * area.width(); }
  double y(double v) const { return area.bottom() - v / top * area.height(); }
};

double r10(int n) {
  // ISO 3, basic series R10.
  static constexpr double series[] = {1, 1.25, 1.6, 2, 2.5, 3.15, 4, 5, 6.3, 8};
  const int decade = n >= 0 ? n / 10 : -((9 - n) / 10);
  return series[n - 10 * decade] * std::pow(10.0, decade);
}

int class_of(double diameter) {
  int n = static_cast<int>(std::floor(10 * std::log10(diameter)));
  while (r10(n) > diameter) --n;
  while (r10(n + 1) <= diameter) ++n;
  return n;
}

double round_above(double value) {
  for (const double step : {1.0, 2.0, 5.0, 10.0}) {
    const double power = std::pow(10.0, std::floor(std::log10(value)));
    if (step * power >= value) return step * power;
  }
  return value;
}

void paint_title(QPainter& painter, const Plot& plot, const char* title) {
  painter.setPen(colour_of(ink));
  painter.setFont(text_font(letter, true));
  painter.drawText(QPointF(plot.area.left(), plot.area.top() - 14), QString::fromUtf8(title));
}

void paint_rows(QPainter& painter, const Plot& plot,
                const std::vector<std::pair<double, std::string>>& rows) {
  painter.setFont(text_font(letter));
  for (const auto& [value, words] : rows) {
    const double y = plot.y(value);
    painter.setPen(QPen(colour_of(grid), 1.5));
    painter.drawLine(QPointF(plot.area.left(), y), QPointF(plot.area.right(), y));
    painter.setPen(colour_of(soft_ink));
    painter.drawText(QRectF(0, y - 12, left - 10, 24), Qt::AlignRight | Qt::AlignVCenter, qt_text(words));
  }
}

void paint_floor(QPainter& painter, const Plot& plot) {
  painter.setPen(QPen(colour_of(soft_ink), 1.5));
  painter.drawLine(plot.area.bottomLeft(), plot.area.bottomRight());
}

void paint_upright(QPainter& painter, const Plot& plot, double at, const Rgb& colour, Qt::PenStyle style,
                   const std::string& words, double words_y) {
  const double x = plot.x(at);
  painter.setPen(QPen(colour_of(colour), 2.2, style));
  painter.drawLine(QPointF(x, plot.area.top()), QPointF(x, plot.area.bottom()));
  painter.setFont(text_font(letter));
  const double width = QFontMetricsF(painter.font()).horizontalAdvance(qt_text(words)) + 6;
  const bool flip = x + 6 + width > plot.area.right();
  const QRectF box(flip ? x - 6 - width : x + 6, words_y, width, 22);
  painter.fillRect(box, QColor(255, 255, 255, 215));
  painter.drawText(box, Qt::AlignCenter, qt_text(words));
}

// Class limits under the lowest plot, as many as there is room for.
void paint_class_limits(QPainter& painter, const Plot& plot, const std::vector<SizeClass>& classes) {
  painter.setPen(colour_of(soft_ink));
  painter.setFont(text_font(letter));
  const std::size_t skip = 1 + classes.size() / 13;
  for (std::size_t i = 0; i <= classes.size(); i += skip) {
    const double mm = i < classes.size() ? classes[i].from_mm : classes.back().to_mm;
    const double x = plot.x(static_cast<double>(i));
    painter.drawLine(QPointF(x, plot.area.bottom()), QPointF(x, plot.area.bottom() + 6));
    painter.drawText(QRectF(x - 40, plot.area.bottom() + 8, 80, 24), Qt::AlignHCenter,
                     qt_text(number_text(mm, 3)));
  }
  painter.drawText(QRectF(plot.area.left(), plot.area.bottom() + 36, plot.area.width(), 24), Qt::AlignHCenter,
                   "equivalent diameter, mm (classes of equal ratio)");
}

// Where a diameter lies on the axis of classes, in classes from the first.
double class_position(const std::vector<SizeClass>& classes, double diameter) {
  const double from = std::log(classes.front().from_mm), to = std::log(classes.back().to_mm);
  return (std::log(diameter) - from) / (to - from) * static_cast<double>(classes.size());
}

void paint_counts(QPainter& painter, const Plot& plot, const std::vector<SizeClass>& classes,
                  const Inspection& inspection) {
  paint_title(painter, plot, "Number of pores");
  const double step = std::max(1.0, round_length(plot.top / 4));
  std::vector<std::pair<double, std::string>> rows;
  for (double v = 0; v <= plot.top + 1e-9; v += step) rows.emplace_back(v, number_text(v));
  paint_rows(painter, plot, rows);
  for (std::size_t i = 0; i < classes.size(); ++i) {
    if (classes[i].count == 0) continue;
    const double x0 = plot.x(static_cast<double>(i)) + 2, x1 = plot.x(static_cast<double>(i) + 1) - 2;
    const double y = plot.y(static_cast<double>(classes[i].count));
    painter.fillRect(QRectF(QPointF(x0, y), QPointF(x1, plot.area.bottom())), colour_of(bar));
  }
  paint_floor(painter, plot);
  double words_y = plot.area.top() + 2;
  const auto line = [&](double diameter, const Rgb& colour, Qt::PenStyle style, const std::string& words) {
    const double at = diameter > 0 ? class_position(classes, diameter) : -1;
    if (at < 0 || at > static_cast<double>(classes.size())) return;
    paint_upright(painter, plot, at, colour, style, words, words_y);
    words_y += 26;
  };
  line(inspection.pore_summary.smallest_expected_diameter_mm, soft_ink, Qt::DashLine,
       "smallest expected to show");
  for (const RequirementResult& r : inspection.requirements)
    if (r.requirement.quantity == Quantity::pore_diameter && r.requirement.max)
      line(*r.requirement.max, verdict_line_colour(r.verdict), Qt::SolidLine,
           "limit " + one_line(r.requirement.id));
}

void paint_cumulative(QPainter& painter, const Plot& plot, const std::vector<SizeClass>& classes) {
  paint_title(painter, plot, "Share of the pore volume in pores up to this size, %");
  paint_rows(painter, plot, {{0, "0"}, {25, "25"}, {50, "50"}, {75, "75"}, {100, "100"}});
  double total = 0, sum = 0;
  for (const SizeClass& c : classes) total += c.volume_mm3;
  QPolygonF line;
  line << QPointF(plot.x(0), plot.y(0));
  for (std::size_t i = 0; i < classes.size(); ++i) {
    sum += classes[i].volume_mm3;
    line << QPointF(plot.x(static_cast<double>(i) + 1), plot.y(total > 0 ? 100 * sum / total : 0));
  }
  painter.setPen(QPen(colour_of(bar), 3, Qt::SolidLine, Qt::RoundCap, Qt::RoundJoin));
  painter.drawPolyline(line);
  paint_floor(painter, plot);
}

}  // namespace

std::vector<SizeClass> size_classes(const std::vector<Pore>& pores) {
  std::vector<std::pair<int, double>> found;
  for (const Pore& pore : pores)
    if (pore.kind != PoreKind::inclusion && pore.equivalent_diameter_mm > 0 &&
        std::isfinite(pore.equivalent_diameter_mm))
      found.emplace_back(class_of(pore.equivalent_diameter_mm), pore.volume_mm3.value);
  if (found.empty()) return {};
  const auto [low, high] = std::minmax_element(found.begin(), found.end());
  // A few pores of one size make a narrow row: empty classes on both sides keep the picture readable.
  const int missing = std::max(0, least_classes - (high->first - low->first + 1));
  const int first = low->first - (missing + 1) / 2, last = high->first + missing / 2;
  std::vector<SizeClass> classes;
  for (int n = first; n <= last; ++n) classes.push_back({r10(n), r10(n + 1), 0, 0});
  for (const auto& [n, volume] : found) {
    SizeClass& c = classes[static_cast<std::size_t>(n - first)];
    ++c.count;
    c.volume_mm3 += volume;
  }
  return classes;
}

Figure pore_size_figure(const Inspection& inspection) {
  std::vector<SizeClass> classes = size_classes(inspection.pores);
  if (classes.empty()) return {};
  std::int64_t most = 1;
  for (const SizeClass& c : classes) most = std::max(most, c.count);
  QImage image = blank_image(chart_width, 600);
  QPainter painter(&image);
  painter.setRenderHint(QPainter::Antialiasing);
  const double last = static_cast<double>(classes.size());
  const Plot counts{
      {left, 40, chart_width - left - right, 250}, 0, last, round_above(static_cast<double>(most))};
  const Plot cumulative{{left, 350, chart_width - left - right, 170}, 0, last, 100};
  paint_counts(painter, counts, classes, inspection);
  paint_cumulative(painter, cumulative, classes);
  paint_class_limits(painter, cumulative, classes);
  painter.end();
  return {picture_of(image), "Pores by size, and the share of the pore volume that pores up to a size hold",
          "Histogram of pore diameters and cumulative pore volume"};
}

Figure grey_histogram_figure(const Inspection& inspection) {
  const GreyLevels& levels = inspection.grey_levels;
  const Histogram& h = levels.histogram;
  if (h.counts.empty() || !(h.bin_width > 0) || !(levels.contrast() > 0)) return {};
  const double low = levels.air - 0.5 * levels.contrast(), high = levels.material + 0.5 * levels.contrast();
  // One column of the chart may cover many bins: their sum is drawn, so that gaps of stretched histograms do
  // not look like missing grey values.
  constexpr int column_count = 220;
  std::vector<double> columns(column_count, 0);
  for (std::size_t i = 0; i < h.counts.size(); ++i) {
    const double at =
        (h.first_grey + static_cast<double>(i) * h.bin_width - low) / (high - low) * column_count;
    if (at >= 0 && at < column_count)
      columns[static_cast<std::size_t>(at)] += static_cast<double>(h.counts[i]);
  }
  const double most = *std::max_element(columns.begin(), columns.end());
  if (!(most >= 1)) return {};
  QImage image = blank_image(chart_width, 380);
  QPainter painter(&image);
  painter.setRenderHint(QPainter::Antialiasing);
  const double top = std::max(1.0, std::ceil(std::log10(most)));
  const Plot plot{{left, 40, chart_width - left - right, 260}, low, high, top};
  paint_title(painter, plot, "Voxels by grey value (logarithmic)");
  std::vector<std::pair<double, std::string>> rows;
  static constexpr const char* exponents[] = {"⁰", "¹", "²", "³", "⁴", "⁵", "⁶", "⁷", "⁸", "⁹"};
  for (int e = 0; e <= static_cast<int>(top); ++e)
    rows.emplace_back(e, e < 10 ? std::string("10") + exponents[e] : "10¹⁰");
  paint_rows(painter, plot, rows);
  for (int i = 0; i < column_count; ++i) {
    if (columns[static_cast<std::size_t>(i)] < 1) continue;
    const double x0 = plot.x(low + (high - low) * i / column_count),
                 x1 = plot.x(low + (high - low) * (i + 1) / column_count);
    const double y = plot.y(std::log10(columns[static_cast<std::size_t>(i)]));
    painter.fillRect(QRectF(QPointF(x0, y), QPointF(x1, plot.area.bottom())), colour_of(bar));
  }
  paint_floor(painter, plot);
  paint_upright(painter, plot, levels.air, ink, Qt::DashLine, "air " + number_text(levels.air), 44);
  paint_upright(painter, plot, levels.threshold, bluish_green, Qt::SolidLine,
                "ISO-50 " + number_text(levels.threshold), 70);
  paint_upright(painter, plot, levels.material, ink, Qt::DashLine, "material " + number_text(levels.material),
                44);
  painter.setFont(text_font(letter));
  painter.setPen(colour_of(soft_ink));
  const double step = round_length((high - low) / 5);
  for (double v = std::ceil(low / step) * step; v <= high; v += step) {
    painter.drawLine(QPointF(plot.x(v), plot.area.bottom()), QPointF(plot.x(v), plot.area.bottom() + 6));
    painter.drawText(QRectF(plot.x(v) - 60, plot.area.bottom() + 8, 120, 24), Qt::AlignHCenter,
                     qt_text(number_text(v)));
  }
  painter.drawText(QRectF(left, plot.area.bottom() + 36, plot.area.width(), 24), Qt::AlignHCenter,
                   "grey value");
  painter.end();
  return {
      picture_of(image),
      "Grey values of the field of view with the levels of air and material and the threshold between them",
      "Grey-value histogram with the levels of air and material"};
}

}  // namespace halfmark
