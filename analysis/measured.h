// A number with its standard uncertainty (JCGM 100, coverage factor 1), in the unit its name tells.
#pragma once

#include <string>
#include <vector>

namespace halfmark {

struct Contribution {
  std::string name;                 // "noise", "threshold", "local level", ...
  double standard_uncertainty = 0;  // in the unit of the measured value
};

struct Measured {
  double value = 0;
  double standard_uncertainty = 0;
  std::vector<Contribution> contributions;  // may be empty where only the sum is kept
};

}  // namespace halfmark
