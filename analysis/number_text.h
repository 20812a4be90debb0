// Numbers and foreign text as people read them: rounded to what is known, with a decimal point whatever the
// locale. Reasons, warnings and reports are written with it; result.json and pores.csv do not round this way.
#pragma once

#include <string>
#include <vector>

namespace halfmark {

// `significant` digits without trailing zeros and without an exponent: "0.62", "1240", "0.0000124". "–" when
// not finite.
std::string number_text(double value, int significant = 4);
// Exactly `decimals` digits after the point.
std::string fixed_text(double value, int decimals);

struct RoundedMeasure {
  std::string value, uncertainty;  // both with the same number of decimals
};
// Common practice: the uncertainty to two significant digits, the value to the same decimals. Without an
// uncertainty (0 or not finite) the value has four significant digits and `uncertainty` is "0".
RoundedMeasure rounded(double value, double expanded_uncertainty);
// "0.62 ± 0.05 mm"
std::string measured_text(double value, double expanded_uncertainty, const std::string& unit);
// printf with up to two numbers, for sentences.
std::string sentence(const char* format, double a, double b = 0);
// "12.3, 4.5, 6.7" with two decimals more than the voxel's leading digit.
std::string position_text(const double* mm, double voxel_mm);

// Text from files made safe for a line of a terminal or a page: control characters become spaces.
std::string one_line(const std::string& text);
// Last part of a path: results name files, not the folders of the machine they were made on.
std::string file_name_of(const std::string& path);
// "accept" -> "Accept"
std::string capitalised(std::string text);
std::string joined(const std::vector<std::string>& texts, const std::string& separator);
// "1 pore", "3 pores"
std::string counted(long long n, const std::string& one, const std::string& many);

}  // namespace halfmark
