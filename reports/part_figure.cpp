#include "reports/part_figure.h"

#include <algorithm>
#include <cmath>

#include "analysis/number_text.h"
#include "reports/canvas.h"
#include "reports/pore_mesh.h"
#include "reports/scene_render.h"

namespace halfmark {

namespace {

constexpr int part_width = 1100, part_height = 760;
constexpr int wall_width = 560, wall_height = 480, legend_height = 74;
constexpr double margin_px = 56;
constexpr double azimuth = -32, elevation = 26;  // front, right and top are seen
// Pores that would be smaller than this on the picture are drawn as a dot of this size.
constexpr double least_pore_px = 3;
// Walls that are none (edges, corners) and those at or beyond the reach of the measurement.
constexpr Rgb not_a_wall{0xc2, 0xc8, 0xcc}, beyond_reach{0xf6, 0xec, 0xc6};

QImage image_from(const SceneRender& scene, int width, int height) {
  const std::vector<std::uint8_t> rgb = scene.pixels();
  QImage image = blank_image(width, height);
  for (int y = 0; y < height; ++y) {
    auto* line = reinterpret_cast<QRgb*>(image.scanLine(y));
    const std::uint8_t* in = rgb.data() + static_cast<std::size_t>(y) * static_cast<std::size_t>(width) * 3;
    for (int x = 0; x < width; ++x, in += 3) line[x] = qRgb(in[0], in[1], in[2]);
  }
  return image;
}

void add_pores(SceneRender& scene, const Camera& camera, const InspectionRun& run,
               const VolumeGeometry& geometry, const RunControl& control) {
  const PoreMesher mesher(run.found.field.labels, geometry);
  for (const Pore& pore : run.inspection.pores) {
    control.throw_if_cancelled();
    TriangleMesh mesh = mesher.mesh_of(pore.id);
    const double px = pore.equivalent_diameter_mm * camera.px_per_mm;
    if (px > 0 && px < least_pore_px) {
      const double grow = least_pore_px / px;
      for (auto& v : mesh.vertices_mm)
        for (std::size_t a = 0; a < 3; ++a)
          v[a] = static_cast<float>(pore.centre_mm[a] + grow * (v[a] - pore.centre_mm[a]));
    }
    scene.add_solid(mesh, verdict_colour(pore.verdict));
  }
}

// A place on or in a body that is itself drawn is not hidden by it.
double hidden_beyond_mm(const EvidencePlace& place) {
  return place.evidence.extent_mm > 0 ? place.evidence.extent_mm : 0;
}

// The letter stands beside its place, away from the picture's middle, with a line to it.
void paint_letters(QPainter& painter, const Camera& camera, const std::vector<EvidencePlace>& places,
                   const SceneRender& scene) {
  std::vector<QPointF> taken;
  for (const EvidencePlace& place : places) {
    const Vec3 p = camera.project(*place.evidence.position_mm);
    const QPointF at(p[0], p[1]);
    QPointF away = at - QPointF(camera.width / 2.0, camera.height / 2.0);
    const double l = std::hypot(away.x(), away.y());
    away = l > 1 ? away / l : QPointF(0.6, -0.8);
    QPointF tag = at + 58 * away;
    const auto clash = [&] {
      return std::any_of(taken.begin(), taken.end(),
                         [&](const QPointF& t) { return std::hypot(t.x() - tag.x(), t.y() - tag.y()) < 38; });
    };
    for (int turn = 0; turn < 12 && clash(); ++turn) {  // round the place until there is room
      const double a = std::atan2(tag.y() - at.y(), tag.x() - at.x()) + 0.55;
      tag = at + 58 * QPointF(std::cos(a), std::sin(a));
    }
    tag.setX(std::clamp(tag.x(), 20.0, camera.width - 20.0));
    tag.setY(std::clamp(tag.y(), 20.0, camera.height - 20.0));
    taken.push_back(tag);
    painter.setBrush(Qt::NoBrush);
    painter.setPen(QPen(Qt::white, 5));
    painter.drawEllipse(at, 11, 11);
    // A dotted ring: the place lies behind what is seen.
    const bool hidden = scene.hides(*place.evidence.position_mm, hidden_beyond_mm(place));
    painter.setPen(QPen(colour_of(ink), 2, hidden ? Qt::DotLine : Qt::SolidLine));
    painter.drawEllipse(at, 11, 11);
    painter.setPen(QPen(colour_of(ink), 2));
    const QPointF d = tag - at;
    const double distance = std::max(1.0, std::hypot(d.x(), d.y()));
    painter.drawLine(at + 11 / distance * d, tag);
    paint_tag(painter, tag.x(), tag.y(), place.letter, place.verdict);
  }
}

void paint_directions(QPainter& painter, const Camera& camera, double x, double y) {
  static constexpr const char* names[] = {"x", "y", "z"};
  painter.setPen(QPen(colour_of(soft_ink), 2, Qt::SolidLine, Qt::RoundCap));
  painter.setFont(text_font(15));
  for (std::size_t a = 0; a < 3; ++a) {
    const QPointF tip(x + 34 * camera.right[a], y - 34 * camera.up[a]);
    painter.drawLine(QPointF(x, y), tip);
    const QPointF label(x + 46 * camera.right[a], y - 46 * camera.up[a]);
    painter.drawText(QRectF(label.x() - 10, label.y() - 10, 20, 20), Qt::AlignCenter, names[a]);
  }
}

void paint_plain_scale(QPainter& painter, double x, double y, const Camera& camera) {
  const double mm = round_length(0.22 * camera.width / camera.px_per_mm);
  painter.setPen(QPen(colour_of(ink), 3, Qt::SolidLine, Qt::FlatCap));
  painter.drawLine(QPointF(x, y), QPointF(x + mm * camera.px_per_mm, y));
  painter.setFont(text_font(16));
  painter.drawText(QPointF(x, y - 8), qt_text(number_text(mm) + " mm"));
}

struct ThicknessScale {
  double low, high;
  double share(double mm) const { return high > low ? (mm - low) / (high - low) : 0; }
};

ThicknessScale thickness_scale(const InspectionRun& run) {
  const WallMap& walls = *run.walls;
  std::vector<float> thickness;
  for (std::size_t i = 0; i < walls.thickness_mm.size(); ++i)
    if (walls.is_wall[i] && !walls.at_cap[i]) thickness.push_back(walls.thickness_mm[i]);
  if (thickness.empty()) return {0, run.inspection.spec.walls.max_mm};
  std::sort(thickness.begin(), thickness.end());
  // Percentiles keep a few stray places from flattening the map.
  const auto at = [&](double share) {
    return double(thickness[static_cast<std::size_t>(share * double(thickness.size() - 1))]);
  };
  ThicknessScale scale{at(0.002), at(0.98)};
  if (scale.high - scale.low < 0.05 * scale.high) scale.low = 0.8 * scale.low;
  return scale;
}

std::vector<Rgb> thickness_colours(const WallMap& walls, const ThicknessScale& scale) {
  std::vector<Rgb> colours(walls.thickness_mm.size());
  for (std::size_t i = 0; i < colours.size(); ++i)
    colours[i] = walls.at_cap[i]    ? beyond_reach
                 : walls.is_wall[i] ? viridis(scale.share(walls.thickness_mm[i]))
                                    : not_a_wall;
  return colours;
}

void paint_legend(QPainter& painter, const ThicknessScale& scale, int width, int y) {
  const double x0 = 60, x1 = 0.52 * width;
  for (int x = static_cast<int>(x0); x < static_cast<int>(x1); ++x)
    painter.fillRect(x, y, 1, 16, colour_of(viridis((x - x0) / (x1 - x0))));
  painter.setPen(colour_of(ink));
  painter.setFont(text_font(16));
  const double step = round_length((scale.high - scale.low) / 3);
  for (double mm = std::ceil(scale.low / step - 1e-9) * step; mm <= scale.high + 1e-9 * step; mm += step) {
    const double x = x0 + scale.share(mm) * (x1 - x0);
    painter.drawLine(QPointF(x, y + 16), QPointF(x, y + 22));
    painter.drawText(QRectF(x - 50, y + 22, 100, 24), Qt::AlignHCenter, qt_text(number_text(mm)));
  }
  painter.drawText(QPointF(x1 + 10, y + 14), "mm");
  const auto swatch = [&](double x, const Rgb& colour, const char* words) {
    painter.fillRect(QRectF(x, y, 16, 16), colour_of(colour));
    painter.setPen(QPen(colour_of(rule_grey), 1));
    painter.drawRect(QRectF(x, y, 16, 16));
    painter.setPen(colour_of(ink));
    painter.drawText(QPointF(x + 24, y + 14), words);
  };
  swatch(0.62 * width, not_a_wall, "edge or corner");
  swatch(0.80 * width, beyond_reach, "beyond reach");
}

}  // namespace

Figure part_figure(const InspectionRun& run, const VolumeGeometry& geometry,
                   const std::vector<EvidencePlace>& places, const RunControl& control) {
  const TriangleMesh& surface = run.outer_surface.triangles.empty() ? run.surface : run.outer_surface;
  if (surface.triangles.empty()) return {};
  const Camera camera = camera_for(surface, azimuth, elevation, part_width, part_height, margin_px);
  SceneRender scene(camera);
  scene.add_glass(surface);
  control.throw_if_cancelled();
  add_pores(scene, camera, run, geometry, control);
  QImage image = image_from(scene, part_width, part_height);
  QPainter painter(&image);
  painter.setRenderHint(QPainter::Antialiasing);
  paint_letters(painter, camera, places, scene);
  paint_directions(painter, camera, 58, part_height - 52);
  paint_plain_scale(painter, part_width - 300, part_height - 22, camera);
  painter.end();
  return {picture_of(image), "The part with its pores and the deciding places",
          "The part seen from the front, right and above; pores are solid, deciding places are lettered"};
}

Figure wall_figure(const InspectionRun& run, const std::vector<EvidencePlace>& places,
                   const RunControl& control) {
  if (!run.walls || run.outer_surface.triangles.empty() ||
      run.walls->thickness_mm.size() != run.outer_surface.vertices_mm.size())
    return {};
  std::vector<EvidencePlace> thin;
  for (const EvidencePlace& place : places)
    if (place.wall) thin.push_back(place);
  const ThicknessScale scale = thickness_scale(run);
  const std::vector<Rgb> colours = thickness_colours(*run.walls, scale);
  QImage image = blank_image(2 * wall_width, wall_height + legend_height);
  QPainter painter(&image);
  painter.setRenderHint(QPainter::Antialiasing);
  for (int side = 0; side < 2; ++side) {
    control.throw_if_cancelled();
    const double turn = side == 0 ? azimuth : azimuth + 180;
    const Camera camera = camera_for(run.outer_surface, turn, side == 0 ? elevation : -elevation, wall_width,
                                     wall_height, margin_px);
    SceneRender scene(camera);
    scene.add_solid(run.outer_surface, colours);
    QImage view = image_from(scene, wall_width, wall_height);
    QPainter over(&view);
    over.setRenderHint(QPainter::Antialiasing);
    paint_letters(over, camera, thin, scene);
    paint_directions(over, camera, 54, wall_height - 52);
    over.end();
    painter.drawImage(side * wall_width, 0, view);
  }
  paint_legend(painter, scale, 2 * wall_width, wall_height + 16);
  painter.end();
  return {picture_of(image),
          "Wall thickness by the largest inscribed sphere: front from above, back from below",
          "Wall-thickness map of the part's surface from two opposite sides"};
}

}  // namespace halfmark
