#include "reports/colours.h"

#include <algorithm>
#include <cmath>

namespace halfmark {

Rgb viridis(double share) {
  // Eleven anchors of the published map (S. van der Walt, N. Smith, 2015), linear between them.
  static constexpr Rgb anchors[] = {{0x44, 0x01, 0x54}, {0x48, 0x24, 0x75}, {0x41, 0x44, 0x87},
                                    {0x35, 0x5f, 0x8d}, {0x2a, 0x78, 0x8e}, {0x21, 0x91, 0x8c},
                                    {0x22, 0xa8, 0x84}, {0x44, 0xbf, 0x70}, {0x7a, 0xd1, 0x51},
                                    {0xbd, 0xdf, 0x26}, {0xfd, 0xe7, 0x25}};
  constexpr int last = 10;
  const double at = std::isfinite(share) ? std::clamp(share, 0.0, 1.0) * last : 0;
  const int i = std::min(static_cast<int>(at), last - 1);
  Rgb colour;
  for (std::size_t c = 0; c < 3; ++c)
    colour[c] = static_cast<std::uint8_t>(
        std::lround(anchors[i][c] + (at - i) * (double(anchors[i + 1][c]) - double(anchors[i][c]))));
  return colour;
}

std::string hex(const Rgb& colour) {
  static constexpr char digits[] = "0123456789abcdef";
  std::string text = "#";
  for (const std::uint8_t c : colour) {
    text += digits[c >> 4];
    text += digits[c & 15];
  }
  return text;
}

}  // namespace halfmark
