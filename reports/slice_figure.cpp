#include "reports/slice_figure.h"

#include <algorithm>
#include <cmath>
#include <map>

#include "analysis/number_text.h"
#include "reports/canvas.h"
#include "reports/contour.h"
#include "reports/slice_plan.h"

namespace halfmark {

namespace {

constexpr int detail_px = 760, overview_px = 460;
// Greys from a little under air to a little over material fill the scale: air stays dark, inclusions stand
// out.
constexpr double grey_below_air = 0.12, grey_above_material = 0.35;

// Where the samples of a window lie on the picture: u to the right, v upwards.
struct Frame {
  SliceWindow window;
  double su, sv;  // voxel edges, mm
  double px_per_mm;
  int width, height;

  double x(double u) const { return (u - static_cast<double>(window.begin[0]) + 0.5) * su * px_per_mm; }
  double y(double v) const {
    return height - (v - static_cast<double>(window.begin[1]) + 0.5) * sv * px_per_mm;
  }
  QPointF sample(double i, double j) const {
    const double step = static_cast<double>(window.step);
    return {x(static_cast<double>(window.begin[0]) + i * step),
            y(static_cast<double>(window.begin[1]) + j * step)};
  }
};

Frame frame_of(const SliceWindow& window, const VolumeGeometry& g, int longest_px) {
  Frame f{window,
          g.spacing_mm[static_cast<std::size_t>(window.u_axis())],
          g.spacing_mm[static_cast<std::size_t>(window.v_axis())],
          1,
          1,
          1};
  const double w = static_cast<double>(window.end[0] - window.begin[0]) * f.su;
  const double h = static_cast<double>(window.end[1] - window.begin[1]) * f.sv;
  f.px_per_mm = longest_px / std::max(w, h);
  // A slice a voxel or two thick still makes a strip that can be seen.
  f.width = std::max(16, static_cast<int>(std::lround(w * f.px_per_mm)));
  f.height = std::max(16, static_cast<int>(std::lround(h * f.px_per_mm)));
  return f;
}

float bilinear(const GreySlice& slice, double i, double j) {
  const std::int64_t w = slice.window.width(), h = slice.window.height();
  i = std::clamp(i, 0.0, static_cast<double>(w - 1));
  j = std::clamp(j, 0.0, static_cast<double>(h - 1));
  const auto i0 = std::min<std::int64_t>(static_cast<std::int64_t>(i), std::max<std::int64_t>(0, w - 2));
  const auto j0 = std::min<std::int64_t>(static_cast<std::int64_t>(j), std::max<std::int64_t>(0, h - 2));
  const std::int64_t i1 = std::min(i0 + 1, w - 1), j1 = std::min(j0 + 1, h - 1);
  const auto a = static_cast<float>(i - static_cast<double>(i0)),
             b = static_cast<float>(j - static_cast<double>(j0));
  return (1 - b) * ((1 - a) * slice.at(i0, j0) + a * slice.at(i1, j0)) +
         b * ((1 - a) * slice.at(i0, j1) + a * slice.at(i1, j1));
}

QImage grey_image(const GreySlice& slice, const Frame& f, const GreyLevels& levels) {
  QImage image = blank_image(f.width, f.height);
  const double low = levels.air - grey_below_air * levels.contrast();
  const double range = (1 + grey_below_air + grey_above_material) * levels.contrast();
  const double step = static_cast<double>(slice.window.step);
  for (int y = 0; y < f.height; ++y) {
    auto* line = reinterpret_cast<QRgb*>(image.scanLine(y));
    const double j = ((f.height - (y + 0.5)) / (f.sv * f.px_per_mm) - 0.5) / step;
    for (int x = 0; x < f.width; ++x) {
      const double i = ((x + 0.5) / (f.su * f.px_per_mm) - 0.5) / step;
      const double share = range > 0 ? (bilinear(slice, i, j) - low) / range : 0.5;
      const int grey =
          std::isfinite(share) ? static_cast<int>(std::lround(255 * std::clamp(share, 0.0, 1.0))) : 0;
      line[x] = qRgb(grey, grey, grey);
    }
  }
  return image;
}

void paint_segments(QPainter& painter, const Frame& f, const std::vector<Segment>& segments,
                    const QPen& pen) {
  painter.setPen(pen);
  for (const Segment& s : segments) painter.drawLine(f.sample(s[0], s[1]), f.sample(s[2], s[3]));
}

QPen line_pen(const QColor& colour, double width, Qt::PenStyle style = Qt::SolidLine) {
  return QPen(colour, width, style, Qt::RoundCap, Qt::RoundJoin);
}

// Outlines of the label voxels in the verdict's colour; the deciding pore's is thicker.
void paint_pores(QPainter& painter, const Frame& f, const InspectionRun& run, const EvidencePlace& place) {
  const std::vector<std::int32_t> labels = label_slice(run.found.field.labels, f.window);
  std::map<std::int32_t, Verdict> seen;
  for (const Pore& pore : run.inspection.pores) seen[pore.id] = pore.verdict;
  // All pores of one verdict are drawn by one contour: the lines between touching pores of one colour tell
  // nothing.
  for (const Verdict verdict : {Verdict::accept, Verdict::undecided, Verdict::reject}) {
    std::vector<float> mask(labels.size(), 0);
    bool any = false;
    for (std::size_t i = 0; i < labels.size(); ++i) {
      if (labels[i] <= 0 || labels[i] == place.evidence.pore_id) continue;
      const auto pore = seen.find(labels[i]);
      if (pore == seen.end() || pore->second != verdict) continue;
      mask[i] = 1;
      any = true;
    }
    if (any)
      paint_segments(painter, f, contour(mask, f.window.width(), f.window.height(), 0.5f),
                     line_pen(colour_of(verdict_colour(verdict)), 1.8));
  }
  if (place.evidence.pore_id <= 0) return;
  std::vector<float> mask(labels.size(), 0);
  for (std::size_t i = 0; i < labels.size(); ++i) mask[i] = labels[i] == place.evidence.pore_id ? 1.0f : 0.0f;
  const auto own = contour(mask, f.window.width(), f.window.height(), 0.5f);
  paint_segments(painter, f, own, line_pen(colour_of(verdict_colour(place.verdict)), 3.2));
}

void paint_arrow(QPainter& painter, const QPointF& from, const QPointF& to) {
  const QPointF d = to - from;
  const double l = std::hypot(d.x(), d.y());
  if (l < 1) return;
  const QPointF e = d / l, n(-e.y(), e.x());
  painter.drawLine(from, to);
  painter.drawPolyline(QPolygonF({to - 9 * e + 5 * n, to, to - 9 * e - 5 * n}));
}

// A line across the wall with its arrows from outside and its length.
void paint_wall(QPainter& painter, const Frame& f, const SlicePlan& plan, const EvidencePlace& place) {
  const auto u = static_cast<std::size_t>(f.window.u_axis()), v = static_cast<std::size_t>(f.window.v_axis());
  const QPointF a(f.x(plan.wall_from_index[u]), f.y(plan.wall_from_index[v]));
  const QPointF b(f.x((*plan.wall_index)[u]), f.y((*plan.wall_index)[v]));
  const QPointF d = b - a;
  const double l = std::hypot(d.x(), d.y());
  if (l < 2) return;
  const QPointF e = d / l;
  for (const auto& [colour, width] :
       {std::pair{QColor(20, 26, 31, 220), 6.0}, std::pair{colour_of(verdict_colour(place.verdict)), 3.0}}) {
    painter.setPen(line_pen(colour, width));
    paint_arrow(painter, a - 46 * e, a - 2 * e);
    paint_arrow(painter, b + 46 * e, b + 2 * e);
  }
  paint_rimmed_text(painter, b.x() + 30 * e.x() + 10, b.y() + 30 * e.y() - 12,
                    number_text(place.wall_mm, 3) + " mm", 20);
}

void paint_axes(QPainter& painter, const Frame& f) {
  static constexpr const char* names[] = {"x", "y", "z"};
  const QPointF origin(f.width - 62, f.height - 24);
  for (const auto& [colour, width] :
       {std::pair{QColor(20, 26, 31, 220), 5.0}, std::pair{QColor(Qt::white), 2.0}}) {
    painter.setPen(line_pen(colour, width));
    paint_arrow(painter, origin, origin + QPointF(34, 0));
    paint_arrow(painter, origin, origin + QPointF(0, -34));
  }
  paint_rimmed_text(painter, origin.x() + 40, origin.y() + 6, names[f.window.u_axis()], 18);
  paint_rimmed_text(painter, origin.x() - 5, origin.y() - 42, names[f.window.v_axis()], 18);
}

void paint_mark(QPainter& painter, const Frame& f, const SlicePlan& plan, const EvidencePlace& place) {
  if (place.section_axis >= 0 && !(place.evidence.extent_mm > 0)) return;  // the whole section is the place
  const auto u = static_cast<std::size_t>(f.window.u_axis()), v = static_cast<std::size_t>(f.window.v_axis());
  const double x = f.x(plan.index[u]), y = f.y(plan.index[v]);
  const double half = std::max(plan.half_mm[u] * f.px_per_mm, 16.0);
  paint_corners(painter, x, y, half, half, place.verdict);
  const double tag_x = std::min(x + half + 26, f.width - 22.0), tag_y = std::max(y - half - 8, 22.0);
  paint_tag(painter, tag_x, tag_y, place.letter, place.verdict);
}

std::string slice_words(const SliceWindow& window, const VolumeGeometry& g) {
  static constexpr const char* names[] = {"x", "y", "z"};
  Vec3 index{0, 0, 0};
  const auto axis = static_cast<std::size_t>(window.axis);
  index[axis] = static_cast<double>(window.index);
  std::string words = std::string("slice across ") + names[axis];
  const bool straight = std::abs(g.direction[axis * 4]) > 0.999;
  if (straight)
    words += std::string(" at ") + names[axis] + " = " + number_text(g.index_to_mm(index)[axis], 4) + " mm";
  return words + " (voxel plane " + std::to_string(window.index) + ")";
}

Figure detail_figure(const InspectionRun& run, const GreySlice& slice, const SlicePlan& plan,
                     const EvidencePlace& place, const VolumeGeometry& g) {
  const Frame f = frame_of(plan.detail, g, detail_px);
  const GreyLevels& levels = run.inspection.grey_levels;
  QImage image = grey_image(slice, f, levels);
  QPainter painter(&image);
  painter.setRenderHint(QPainter::Antialiasing);
  const auto iso =
      contour(slice.grey, slice.window.width(), slice.window.height(), static_cast<float>(levels.threshold));
  paint_segments(painter, f, iso, line_pen(colour_of(bluish_green), 1.6));
  paint_pores(painter, f, run, place);
  if (plan.wall_index) paint_wall(painter, f, plan, place);
  paint_mark(painter, f, plan, place);
  paint_scale_bar(painter, 18, f.height - 16, f.px_per_mm, 0.35 * f.width);
  paint_axes(painter, f);
  painter.end();
  const std::string what = place.evidence.what.empty() ? "deciding place" : one_line(place.evidence.what);
  const std::string words = slice_words(plan.detail, g);
  return {picture_of(image), place.letter + ": " + what + ", " + words,
          "Grey-value slice around place " + place.letter + ": " + what + ", " + words};
}

Figure overview_figure(const InspectionRun& run, const GreySlice& slice, const SlicePlan& plan,
                       const EvidencePlace& place, const VolumeGeometry& g) {
  const Frame f = frame_of(plan.overview, g, overview_px);
  QImage image = grey_image(slice, f, run.inspection.grey_levels);
  QPainter painter(&image);
  painter.setRenderHint(QPainter::Antialiasing);
  const QRectF window(QPointF(f.x(static_cast<double>(plan.detail.begin[0]) - 0.5),
                              f.y(static_cast<double>(plan.detail.end[1]) - 0.5)),
                      QPointF(f.x(static_cast<double>(plan.detail.end[0]) - 0.5),
                              f.y(static_cast<double>(plan.detail.begin[1]) - 0.5)));
  painter.setBrush(Qt::NoBrush);
  for (const auto& [colour, width] :
       {std::pair{QColor(20, 26, 31, 220), 5.0}, std::pair{QColor(Qt::white), 2.0}}) {
    painter.setPen(QPen(colour, width));
    painter.drawRect(window);
  }
  const double tag_x = std::min(window.right() + 22, f.width - 20.0);
  paint_tag(painter, tag_x, std::max(window.top() - 4, 20.0), place.letter, place.verdict);
  paint_scale_bar(painter, 14, f.height - 12, f.px_per_mm, 0.3 * f.width);
  painter.end();
  return {picture_of(image), "The whole slice; the frame is the picture beside",
          "The whole slice with the window around place " + place.letter};
}

}  // namespace

std::vector<PlaceFigures> slice_figures(const InspectionRun& run, const VolumeSource& volume,
                                        const std::vector<EvidencePlace>& places, const RunControl& control) {
  const VolumeGeometry& g = volume.geometry();
  std::vector<SlicePlan> plans;
  std::vector<SliceWindow> windows;
  for (const EvidencePlace& place : places) {
    plans.push_back(plan_slice(run, g, place));
    windows.push_back(plans.back().detail);
    windows.push_back(plans.back().overview);
  }
  const std::vector<GreySlice> slices = read_slices(volume, windows, control);
  std::vector<PlaceFigures> figures(places.size());
  for (std::size_t i = 0; i < places.size(); ++i) {
    control.throw_if_cancelled();
    figures[i].detail = detail_figure(run, slices[2 * i], plans[i], places[i], g);
    if (plans[i].has_overview)
      figures[i].overview = overview_figure(run, slices[2 * i + 1], plans[i], places[i], g);
  }
  return figures;
}

}  // namespace halfmark
