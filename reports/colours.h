// The program's colours: verdicts in Okabe and Ito's palette for all kinds of colour vision (M. Okabe, K.
// Ito, "Color Universal Design", 2008), maps in viridis, which rises evenly in lightness.
#pragma once

#include <array>
#include <cstdint>
#include <string>

#include "analysis/pores.h"

namespace halfmark {

using Rgb = std::array<std::uint8_t, 3>;

constexpr Rgb blue{0x00, 0x72, 0xb2}, vermilion{0xd5, 0x5e, 0x00}, yellow{0xf0, 0xe4, 0x42};
constexpr Rgb bluish_green{0x00, 0x9e, 0x73};
constexpr Rgb ink{0x1d, 0x26, 0x2d}, soft_ink{0x5b, 0x67, 0x70}, rule_grey{0xc9, 0xd0, 0xd5},
    paper{0xff, 0xff, 0xff};

constexpr Rgb verdict_colour(Verdict v) {
  return v == Verdict::accept ? blue : v == Verdict::reject ? vermilion : yellow;
}
// Yellow on white is too faint for lines and letters: they take this darker shade of the same hue.
constexpr Rgb verdict_line_colour(Verdict v) {
  return v == Verdict::undecided ? Rgb{0x8a, 0x7a, 0x00} : verdict_colour(v);
}

// share in [0, 1], clamped.
Rgb viridis(double share);
std::string hex(const Rgb& colour);  // "#0072b2"

}  // namespace halfmark
