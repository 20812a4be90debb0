// The main job: a volume and a spec become a finished inspection. The command line, the viewer and the tests
// all call this; nobody computes a result of their own.
#pragma once

#include <optional>

#include "analysis/inspection_result.h"
#include "analysis/pore_segmentation.h"
#include "io/dispositions.h"
#include "io/run_control.h"
#include "io/triangle_mesh.h"
#include "io/volume_open.h"

namespace halfmark {

struct InspectOptions {
  int body = 0;     // 0: the largest
  int threads = 0;  // 0: all cores
  std::string serial;
  std::string volume_sha256;  // filled by the caller, shown in the result
  std::vector<Disposition> dispositions;
};

struct InspectionRun {  // the value and what pictures and meshes need
  Inspection inspection;
  FieldOfView field;
  PartMap part;
  SegmentedPores found;        // with those left out
  TriangleMesh surface;        // of the material, pores included
  TriangleMesh outer_surface;  // pores filled; empty unless walls were measured
  std::optional<WallMap> walls;
};

// Throws Problem for bad data (prefixed by the step) and Problem(interrupted) within a second after cancel().
InspectionRun inspect(const OpenedVolume& volume, const InspectionSpec& spec,
                      const InspectOptions& options = {}, const RunControl& control = {});

}  // namespace halfmark
