// A cast bracket: a foot and an upright with two ribs, a boss with a bore, a screw hole and a fillet. It has
// gas pores of graded sizes, a shrinkage cavity where foot and upright meet, one pore open to the top of the
// foot, one dense inclusion and one rib cast too thin; a chip lies beside it.
#include "demo_volumes/part_builder.h"
#include "demo_volumes/parts.h"

namespace halfmark {

namespace {

// A rib in the corner of foot and upright, from y to y + thickness, sloping at 45 degrees.
SolidPtr rib(double y, double thickness) {
  return intersected(
      {box({4.5, y, 4.0}, {10.5, y + thickness, 10.0}), below_plane({7.5, y, 7.0}, {1, 0, 1}, 20)});
}

SolidPtr bracket_body() {
  const SolidPtr foot = box({2, 2.5, 1.5}, {20, 13.5, 4.5});
  const SolidPtr upright = box({2, 2.5, 1.5}, {5, 13.5, 10.5});
  const SolidPtr boss = cylinder({14.5, 8, 2}, {14.5, 8, 8}, 3.2);
  const SolidPtr fillet =
      subtracted(box({4.9, 2.5, 4.4}, {6.5, 13.5, 6}), {cylinder({6.5, 0, 6}, {6.5, 16, 6}, 1.5)});
  const SolidPtr bore = cylinder({14.5, 8, 0}, {14.5, 8, 10}, 1.6);
  const SolidPtr screw_hole = cylinder({0, 8, 7.8}, {8, 8, 7.8}, 1.0);
  return subtracted(united({foot, upright, boss, fillet, rib(4.0, 1.4), rib(10.6, 0.9)}), {bore, screw_hole});
}

struct Gas {
  Vec3 centre_mm;
  double diameter_mm;
};
const Gas gas_pores[] = {
    {{10.5, 11.0, 3.0}, 1.6},                            // foot: the deciding pore
    {{7.6, 7.1, 2.9}, 1.3},   {{12.2, 4.0, 3.1}, 0.8},   // foot
    {{18.6, 11.6, 3.0}, 0.6}, {{11.0, 7.7, 2.6}, 0.5},   // foot
    {{6.8, 12.2, 2.8}, 0.4},  {{9.0, 9.3, 3.3}, 0.3},    // foot
    {{13.0, 12.3, 2.7}, 0.6}, {{13.7, 12.5, 3.2}, 0.5},  // a near pair
    {{3.5, 4.4, 8.5}, 1.0},   {{3.5, 11.6, 9.0}, 0.8},   // upright
    {{3.4, 12.2, 6.5}, 0.5},                             // upright
    {{16.9, 8.0, 6.2}, 0.4},                             // boss
};

Json bracket_spec(const PartBuilder& part) {
  Json spec = Json::parse(R"({
    "spec_version": 1,
    "title": "Bracket: porosity, inclusions and walls",
    "part": { "name": "bracket", "drawing": "HM-1042", "revision": "C", "material": "cast aluminium" },
    "pores": { "inclusions": true },
    "wall_thickness": { "max_mm": 4.0 },
    "zones": [
      { "id": "part", "shape": "everything" },
      { "id": "boss", "shape": "cylinder", "from_mm": [], "to_mm": [], "radius_mm": 3.4 }
    ],
    "requirements": [
      { "id": "R1", "zone": "part", "quantity": "porosity", "max": 0.5 },
      { "id": "R2", "zone": "part", "quantity": "pore_diameter", "max": 1.2 },
      { "id": "R3", "zone": "part", "quantity": "wall_thickness", "min": 1.2 },
      { "id": "R4", "zone": "part", "quantity": "inclusion_diameter", "max": 0.4 },
      { "id": "R5", "zone": "part", "quantity": "open_porosity", "max": 0.25 },
      { "id": "R6", "zone": "boss", "quantity": "pore_diameter", "max": 0.8 }
    ],
    "decision": { "rule": "guarded", "coverage_factor": 2 }
  })");
  spec["zones"][1]["from_mm"] = part.placed(Vec3{14.5, 8, 5});
  spec["zones"][1]["to_mm"] = part.placed(Vec3{14.5, 8, 8.2});
  return spec;
}

}  // namespace

DemoPart bracket_part(const DemoOptions& options) {
  PartBuilder part("bracket", demo_geometry({22, 16, 12}, options.scale), {1, 0.6, 2}, 2.5);
  part.body(bracket_body());
  for (const Gas& gas : gas_pores) part.gas_pore(gas.centre_mm, gas.diameter_mm);
  part.cavity("shrinkage", shrinkage_cavity({3.9, 8.0, 3.3}, {1.3, 2.6, 1.1}, 45, 11));
  part.cavity("open",
              united({capsule({18.2, 5.2, 5.5}, {17.9, 5.0, 3.2}, 0.22), sphere({17.9, 5.0, 3.0}, 0.5)}));
  part.inclusion(ellipsoid({9.6, 4.6, 3.0}, {0.35, 0.3, 0.4}), 1.6);
  part.debris(moved(box({10.3, 14.6, 2.1}, {11.7, 15.1, 2.6}), rotation_about({1, 2, 3}, 25), {11, 14.9, 2.4},
                    {0, 0, 0}));
  part.wall("foot", 3.0, {10, 6.5, 3});
  part.wall("upright", 3.0, {3.5, 11.5, 8.8});
  part.wall("boss", 1.6, {14.5, 10.4, 6});
  part.wall("first rib", 1.4, {6.5, 4.7, 6});
  part.wall("second rib", 0.9, {6.5, 11.05, 6});

  part.expect("R1", "reject", part.porosity_percent(), 0.05, "%",
              "porosity is " + in_words(part.porosity_percent(), 2, "%") + ", at most 0.5 % is allowed");
  part.expect("R2", "reject", part.largest_pore_mm(), 0.05, "mm",
              "the largest pore is " + in_words(part.largest_pore_mm(), 2, "mm") +
                  " across, at most 1.2 mm is allowed");
  part.expect("R3", "reject", 0.9, 0.05, "mm", "the second rib is 0.9 mm thick, at least 1.2 mm is demanded");
  part.expect("R4", "reject", 0.695, 0.1, "mm", "the inclusion is 0.7 mm across, at most 0.4 mm is allowed");
  part.expect("R5", "accept", part.open_porosity_percent(), 0.03, "%",
              "one pore of " + in_words(part.open_porosity_percent(), 2, "%") +
                  " is open to the surface, at most 0.25 % is allowed");
  part.expect("R6", "accept", 0.4, 0.05, "mm", "the boss holds one pore of 0.4 mm, 0.8 mm is allowed");
  const Json spec = bracket_spec(part);
  return part.finish("reject", spec, everyday_scan(1042));
}

}  // namespace halfmark
