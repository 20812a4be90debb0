// The files of `--write`: surface.stl, thickness.vtp, pores.vtp, labels.mha.
#pragma once

#include <filesystem>
#include <set>
#include <string>

#include "analysis/inspection.h"
#include "io/output_file.h"

namespace halfmark {

// Throws Problem(usage) for a name that is none of surface, thickness, pores, labels.
void check_extra_names(const std::set<std::string>& names);
// Takes away the extra files of an earlier run into this folder that the present run does not write: they
// would stand beside the report of another part.
void remove_stale_extras(const std::filesystem::path& folder, const std::set<std::string>& names);
// Each into a temporary of `outputs`. Throws Problem: cannot_create, io_error, bad_data (nothing to write: no
// walls were measured, more labels than the format holds).
void write_extras(const InspectionRun& run, const VolumeGeometry& geometry,
                  const std::filesystem::path& folder, const std::set<std::string>& names, OutputSet& outputs,
                  const RunControl& control = {});

}  // namespace halfmark
