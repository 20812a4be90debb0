// Painting without a display: a QImage, one way to make fonts, and the marks that several pictures share.
#pragma once

#include <QFont>
#include <QImage>
#include <QPainter>
#include <string>

#include "reports/colours.h"
#include "reports/picture.h"

namespace halfmark {

// Qt paints text only where a QGuiApplication exists: makes one on the offscreen platform when there is none.
// Safe to call from any thread and as often as one likes.
void ensure_painting();

QColor colour_of(const Rgb& rgb, int alpha = 255);
QFont text_font(double pixels, bool bold = false);
QString qt_text(const std::string& utf8);

QImage blank_image(int width, int height, const Rgb& background = paper);
Picture picture_of(const QImage& image);  // throws Problem(internal) when Qt cannot encode it
QImage image_of(const Picture& picture);

// Round lengths 1, 2, 5 x 10^n: the largest not above `length`.
double round_length(double length);

// A white bar with a dark rim and its length in mm under it; (x, y) is its lower left end.
void paint_scale_bar(QPainter& painter, double x, double y, double px_per_mm, double longest_px);
// A small letter on a dark plate, its middle at (x, y).
void paint_tag(QPainter& painter, double x, double y, const std::string& letter, Verdict verdict);
// The corners of a frame around (x, y): says "here" without covering it.
void paint_corners(QPainter& painter, double x, double y, double half_width, double half_height,
                   Verdict verdict);
// Text with a dark rim, readable on any grey.
void paint_rimmed_text(QPainter& painter, double x, double y, const std::string& text, double pixels);
// The verdict's sign: a disc with a tick, a square with a cross, a triangle with a question mark.
void paint_verdict_sign(QPainter& painter, double x, double y, double size, Verdict verdict);

}  // namespace halfmark
