#include "reports/canvas.h"

#include <QBuffer>
#include <QGuiApplication>
#include <QPainterPath>
#include <clocale>
#include <cmath>
#include <mutex>

#include "analysis/number_text.h"
#include "io/problem.h"

namespace halfmark {

namespace {

constexpr Rgb rim{0x14, 0x1a, 0x1f};

void make_application() {
  if (QCoreApplication::instance()) return;
  qputenv("QT_QPA_PLATFORM", "offscreen");
  static int argc = 1;
  static char name[] = "halfmark";
  static char* argv[] = {name, nullptr};
  // Lives as long as the process: fonts and images may be used until its very end.
  // What Qt has to say about a session it does not find (no run-time folder, no theme) is of no interest
  // here.
  const QtMessageHandler previous =
      qInstallMessageHandler([](QtMsgType, const QMessageLogContext&, const QString&) {});
  new QGuiApplication(argc, argv);
  qInstallMessageHandler(previous);
  // Qt takes the user's locale for the whole C library; numbers keep their point.
  std::setlocale(LC_NUMERIC, "C");
}

void stroke_rimmed(QPainter& painter, const QPainterPath& path, const QColor& colour, double width) {
  painter.setBrush(Qt::NoBrush);
  painter.setPen(QPen(colour_of(rim, 200), width + 2.5, Qt::SolidLine, Qt::SquareCap, Qt::MiterJoin));
  painter.drawPath(path);
  painter.setPen(QPen(colour, width, Qt::SolidLine, Qt::SquareCap, Qt::MiterJoin));
  painter.drawPath(path);
}

}  // namespace

void ensure_painting() {
  static std::once_flag once;
  std::call_once(once, make_application);
}

QColor colour_of(const Rgb& rgb, int alpha) { return QColor(rgb[0], rgb[1], rgb[2], alpha); }

QString qt_text(const std::string& utf8) { return QString::fromStdString(utf8); }

QFont text_font(double pixels, bool bold) {
  QFont font("DejaVu Sans");
  font.setStyleHint(QFont::SansSerif);
  font.setHintingPreference(QFont::PreferNoHinting);
  font.setPixelSize(std::max(1, static_cast<int>(std::lround(pixels))));
  font.setBold(bold);
  return font;
}

QImage blank_image(int width, int height, const Rgb& background) {
  ensure_painting();
  QImage image(width, height, QImage::Format_RGB32);
  image.fill(colour_of(background));
  return image;
}

Picture picture_of(const QImage& image) {
  QByteArray bytes;
  QBuffer buffer(&bytes);
  buffer.open(QIODevice::WriteOnly);
  if (!image.save(&buffer, "PNG"))
    throw Problem(ExitStatus::internal, "report: a picture cannot be encoded as PNG");
  return {image.width(), image.height(), bytes.toStdString()};
}

QImage image_of(const Picture& picture) {
  return QImage::fromData(reinterpret_cast<const uchar*>(picture.png.data()),
                          static_cast<int>(picture.png.size()), "PNG");
}

double round_length(double length) {
  if (!(length > 0) || !std::isfinite(length)) return 1;
  const double power = std::pow(10.0, std::floor(std::log10(length)));
  const double share = length / power;
  return power * (share >= 5 ? 5 : share >= 2 ? 2 : 1);
}

void paint_rimmed_text(QPainter& painter, double x, double y, const std::string& text, double pixels) {
  QPainterPath path;
  path.addText(x, y, text_font(pixels, true), qt_text(text));
  painter.setPen(QPen(colour_of(rim, 200), 3, Qt::SolidLine, Qt::RoundCap, Qt::RoundJoin));
  painter.setBrush(Qt::NoBrush);
  painter.drawPath(path);
  painter.fillPath(path, Qt::white);
}

void paint_scale_bar(QPainter& painter, double x, double y, double px_per_mm, double longest_px) {
  const double mm = round_length(longest_px / px_per_mm);
  const double width = mm * px_per_mm;
  painter.fillRect(QRectF(x - 1.5, y - 7.5, width + 3, 9), colour_of(rim, 200));
  painter.fillRect(QRectF(x, y - 6, width, 6), Qt::white);
  paint_rimmed_text(painter, x, y - 15, number_text(mm) + " mm", 19);
}

void paint_tag(QPainter& painter, double x, double y, const std::string& letter, Verdict verdict) {
  const QRectF plate(x - 15, y - 15, 30, 30);
  painter.setPen(QPen(colour_of(verdict_colour(verdict)), 3));
  painter.setBrush(colour_of(rim));
  painter.drawRoundedRect(plate, 5, 5);
  painter.setPen(Qt::white);
  painter.setFont(text_font(letter.size() > 1 ? 15 : 19, true));
  painter.drawText(plate, Qt::AlignCenter, qt_text(letter));
}

void paint_corners(QPainter& painter, double x, double y, double half_width, double half_height,
                   Verdict verdict) {
  const double arm = 0.35 * std::min(half_width, half_height);
  QPainterPath path;
  for (const double sx : {-1.0, 1.0}) {
    for (const double sy : {-1.0, 1.0}) {
      const double cx = x + sx * half_width, cy = y + sy * half_height;
      path.moveTo(cx - sx * arm, cy);
      path.lineTo(cx, cy);
      path.lineTo(cx, cy - sy * arm);
    }
  }
  stroke_rimmed(painter, path, colour_of(verdict_colour(verdict)), 3);
}

void paint_verdict_sign(QPainter& painter, double x, double y, double size, Verdict verdict) {
  const double h = size / 2;
  painter.save();
  painter.setRenderHint(QPainter::Antialiasing);
  painter.setPen(Qt::NoPen);
  painter.setBrush(colour_of(verdict_colour(verdict)));
  QPen mark(Qt::white, size * 0.11, Qt::SolidLine, Qt::RoundCap, Qt::RoundJoin);
  if (verdict == Verdict::accept) {
    painter.drawEllipse(QPointF(x, y), h, h);
    painter.setPen(mark);
    painter.drawPolyline(QPolygonF({QPointF(x - 0.42 * h, y + 0.05 * h), QPointF(x - 0.1 * h, y + 0.38 * h),
                                    QPointF(x + 0.46 * h, y - 0.36 * h)}));
  } else if (verdict == Verdict::reject) {
    painter.drawRect(QRectF(x - 0.9 * h, y - 0.9 * h, 1.8 * h, 1.8 * h));
    painter.setPen(mark);
    painter.drawLine(QPointF(x - 0.4 * h, y - 0.4 * h), QPointF(x + 0.4 * h, y + 0.4 * h));
    painter.drawLine(QPointF(x - 0.4 * h, y + 0.4 * h), QPointF(x + 0.4 * h, y - 0.4 * h));
  } else {
    painter.setPen(QPen(colour_of(ink), size * 0.05, Qt::SolidLine, Qt::RoundCap, Qt::RoundJoin));
    painter.drawPolygon(
        QPolygonF({QPointF(x, y - 0.95 * h), QPointF(x + h, y + 0.8 * h), QPointF(x - h, y + 0.8 * h)}));
    painter.setPen(colour_of(ink));
    painter.setFont(text_font(size * 0.56, true));
    painter.drawText(QRectF(x - h, y - 0.55 * h, size, 1.35 * h), Qt::AlignCenter, "?");
  }
  painter.restore();
}

}  // namespace halfmark
