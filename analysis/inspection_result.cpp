#include "analysis/inspection_result.h"

namespace halfmark {

const char* to_text(Verdict v) { return v == Verdict::accept ? "accept" : v == Verdict::reject ? "reject" : "undecided"; }

const char* to_text(PoreKind k) {
  switch (k) {
    case PoreKind::closed: return "closed";
    case PoreKind::open: return "open";
    case PoreKind::cut_by_field: return "cut_by_field";
    case PoreKind::in_between: return "in_between";
    case PoreKind::diffuse: return "diffuse";
    case PoreKind::inclusion: break;
  }
  return "inclusion";
}

const char* to_text(ShapeClass s) {
  switch (s) {
    case ShapeClass::round: return "round";
    case ShapeClass::irregular: return "irregular";
    case ShapeClass::flat: return "flat";
    case ShapeClass::unclassified: break;
  }
  return "";
}

}  // namespace halfmark
