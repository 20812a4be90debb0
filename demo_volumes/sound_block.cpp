// A flawless block with a bore and a chamfered edge: what an accepted part looks like.
#include "demo_volumes/part_builder.h"
#include "demo_volumes/parts.h"

namespace halfmark {

DemoPart sound_block_part(const DemoOptions& options) {
  PartBuilder part("sound_block", demo_geometry({14, 12, 10}, options.scale), {0.5, 1, 0.8}, 3);
  const SolidPtr block =
      intersected({box({1.5, 1.5, 1.5}, {12.5, 10.5, 8.5}), below_plane({12.5, 6, 7.7}, {1, 0, 1}, 20)});
  part.body(subtracted(block, {cylinder({7, 6, 0}, {7, 6, 10}, 2)}));
  part.wall("beside the bore", 2.5, {7, 2.75, 5});

  const Json spec = Json::parse(R"({
    "spec_version": 1,
    "title": "Block: porosity and walls",
    "part": { "name": "block", "drawing": "HM-0310", "revision": "B", "material": "cast aluminium" },
    "wall_thickness": { "max_mm": 4.0 },
    "requirements": [
      { "id": "R1", "zone": "part", "quantity": "porosity", "max": 0.1 },
      { "id": "R2", "zone": "part", "quantity": "pore_diameter", "max": 0.6 },
      { "id": "R3", "zone": "part", "quantity": "wall_thickness", "min": 2.2 }
    ],
    "decision": { "rule": "guarded", "coverage_factor": 2 }
  })");
  part.expect("R1", "accept", 0, 0.02, "%", "there is no pore, 0.1 % is allowed");
  part.expect("R2", "accept", 0, 0, "mm", "there is no pore, 0.6 mm is allowed");
  part.expect("R3", "accept", 2.5, 0.06, "mm", "the wall beside the bore is 2.5 mm, 2.2 mm is demanded");
  return part.finish("accept", spec, everyday_scan(310));
}

}  // namespace halfmark
