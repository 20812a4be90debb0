#include "analysis/number_text.h"

#include <algorithm>
#include <array>
#include <charconv>
#include <cmath>
#include <cstdio>
#include <filesystem>

namespace halfmark {

namespace {

// Digits before the point of a value: 3 for 124.5, 0 for 0.12, -1 for 0.012.
int leading_place(double value) {
  return value == 0 ? 1 : static_cast<int>(std::floor(std::log10(std::abs(value)))) + 1;
}

// More decimals than this say nothing in mm, mm^3 or %.
constexpr int most_decimals = 12;

}  // namespace

std::string fixed_text(double value, int decimals) {
  if (!std::isfinite(value)) return "–";
  std::array<char, 400> buffer;  // the largest double has 309 digits before the point
  const auto end = std::to_chars(buffer.data(), buffer.data() + buffer.size(), value,
                                 std::chars_format::fixed, std::clamp(decimals, 0, most_decimals));
  std::string text(buffer.data(), end.ptr);
  if (text.find_first_not_of("-0.") == std::string::npos && text.front() == '-') text.erase(0, 1);
  return text;
}

std::string number_text(double value, int significant) {
  if (!std::isfinite(value)) return "–";
  std::string text = fixed_text(value, significant - leading_place(value));
  if (text.find('.') != std::string::npos) {
    text.erase(text.find_last_not_of('0') + 1);
    if (text.back() == '.') text.pop_back();
  }
  return text;
}

RoundedMeasure rounded(double value, double expanded_uncertainty) {
  if (!(expanded_uncertainty > 0) || !std::isfinite(expanded_uncertainty)) return {number_text(value), "0"};
  const int decimals = 2 - leading_place(expanded_uncertainty);
  if (decimals < 0) {  // whole tens, hundreds ...: the digits below say nothing
    const double unit = std::pow(10.0, -decimals);
    value = unit * std::round(value / unit);
    expanded_uncertainty = unit * std::round(expanded_uncertainty / unit);
  }
  return {fixed_text(value, decimals), fixed_text(expanded_uncertainty, decimals)};
}

std::string measured_text(double value, double expanded_uncertainty, const std::string& unit) {
  if (!std::isfinite(value)) return "–";
  const RoundedMeasure r = rounded(value, expanded_uncertainty);
  // Without an uncertainty the number is a count or a plain fact.
  const std::string number = r.uncertainty == "0" ? r.value : r.value + " ± " + r.uncertainty;
  return number + (unit.empty() ? "" : " " + unit);
}

std::string sentence(const char* format, double a, double b) {
  std::array<char, 300> buffer;
  std::snprintf(buffer.data(), buffer.size(), format, a, b);
  return buffer.data();
}

std::string position_text(const double* mm, double voxel_mm) {
  const int decimals = voxel_mm > 0 ? 2 - leading_place(voxel_mm) : 2;
  return fixed_text(mm[0], decimals) + ", " + fixed_text(mm[1], decimals) + ", " +
         fixed_text(mm[2], decimals);
}

std::string one_line(const std::string& text) {
  std::string line;
  line.reserve(text.size());
  for (std::size_t i = 0; i < text.size(); ++i) {
    const auto c = static_cast<unsigned char>(text[i]);
    if (c < 0x20 || c == 0x7f) {
      line += ' ';
    } else if (c == 0xc2 && i + 1 < text.size() && static_cast<unsigned char>(text[i + 1]) < 0xa0) {
      line += ' ';  // U+0080 to U+009F: control characters in two bytes
      ++i;
    } else {
      line += text[i];
    }
  }
  return line;
}

std::string file_name_of(const std::string& path) {
  const std::filesystem::path p(path);
  return (p.has_filename() ? p.filename() : p.parent_path().filename()).string();
}

std::string capitalised(std::string text) {
  if (!text.empty() && text[0] >= 'a' && text[0] <= 'z') text[0] = static_cast<char>(text[0] - 'a' + 'A');
  return text;
}

std::string joined(const std::vector<std::string>& texts, const std::string& separator) {
  std::string all;
  for (const std::string& text : texts) all += (all.empty() ? "" : separator) + text;
  return all;
}

std::string counted(long long n, const std::string& one, const std::string& many) {
  return std::to_string(n) + " " + (n == 1 ? one : many);
}

}  // namespace halfmark
