// The deciding places of an inspection, lettered A, B, ...: requirements decided at one place share a letter.
#pragma once

#include <string>
#include <vector>

#include "analysis/inspection_result.h"

namespace halfmark {

struct EvidencePlace {
  std::string letter;                     // "A"
  Verdict verdict = Verdict::accept;      // the worst of its requirements'
  std::vector<std::size_t> requirements;  // indices into Inspection::requirements
  Evidence evidence;                      // position_mm is set
  int section_axis = -1;                  // 0, 1, 2 when the evidence is a section across that axis
  bool wall = false;                      // a thin wall: shown with a line across it
  double wall_mm = 0;
};

// Rejecting places first, then undecided, then accepting ones; within these in the requirements' order.
std::vector<EvidencePlace> evidence_places(const Inspection& inspection);
// Letter of a requirement's place; empty when it has none.
std::string letter_of(const std::vector<EvidencePlace>& places, std::size_t requirement);

}  // namespace halfmark
