#include "reports/extra_outputs.h"

#include <algorithm>
#include <cstring>
#include <limits>
#include <map>
#include <system_error>
#include <vector>

#include "io/mesh_file.h"
#include "io/problem.h"
#include "io/volume_open.h"
#include "reports/pore_mesh.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

// What --write names, and the file it becomes.
const std::map<std::string, const char*> files{{"surface", "surface.stl"},
                                               {"thickness", "thickness.vtp"},
                                               {"pores", "pores.vtp"},
                                               {"labels", "labels.mha"}};

// Whole numbers up to this are exact in 32-bit floats.
constexpr std::int32_t most_float_label = 1 << 24;

// Labels as a volume, rendered plane by plane from runs: 16-bit, or 32-bit floats above 65535 pores.
class LabelVolume : public VolumeSource {
 public:
  LabelVolume(const RunLabels& labels, const VolumeGeometry& geometry, VoxelType type)
      : labels_(labels), geometry_(geometry), type_(type) {}
  const VolumeGeometry& geometry() const override { return geometry_; }
  VoxelType voxel_type() const override { return type_; }
  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    if (type_ == VoxelType::u16)
      fill(z_begin, z_end, reinterpret_cast<std::uint16_t*>(out));
    else
      fill(z_begin, z_end, reinterpret_cast<float*>(out));
  }

 private:
  template <class T>
  void fill(std::int64_t z_begin, std::int64_t z_end, T* out) const {
    std::fill(out, out + geometry_.voxels_per_plane() * (z_end - z_begin), T{0});
    if (labels_.empty()) return;
    for (std::int64_t z = z_begin; z < z_end; ++z)
      for (std::int64_t y = 0; y < geometry_.size[1]; ++y) {
        T* row = out + ((z - z_begin) * geometry_.size[1] + y) * geometry_.size[0];
        for (const LabelRun& run : labels_.row(y, z))
          std::fill(row + run.begin, row + run.end, static_cast<T>(run.label));
      }
  }

  const RunLabels& labels_;
  VolumeGeometry geometry_;
  VoxelType type_;
};

// Library writers do not always tell of a full disk: a file without bytes is a failure.
void check_written(const fs::path& temporary, const fs::path& final_name) {
  std::error_code error;
  const auto size = fs::file_size(temporary, error);
  if (error || size == 0)
    throw Problem(ExitStatus::io_error,
                  final_name.string() + ": nothing could be written; is the disk full?");
}

void write_thickness(const InspectionRun& run, const fs::path& path) {
  if (!run.walls || run.walls->thickness_mm.size() != run.outer_surface.vertices_mm.size())
    throw Problem(ExitStatus::usage,
                  "--write thickness: no walls were measured; add \"wall_thickness\" or a requirement on it "
                  "to the spec");
  write_vtp(run.outer_surface, {{"thickness_mm", run.walls->thickness_mm}}, path);
}

void write_pores(const InspectionRun& run, const VolumeGeometry& geometry, const fs::path& path,
                 const RunControl& control) {
  const PoreMesher mesher(run.found.field.labels, geometry);
  TriangleMesh all;
  std::map<std::string, std::vector<float>> arrays{
      {"pore_id", {}}, {"volume_mm3", {}}, {"equivalent_diameter_mm", {}}};
  for (const Pore& pore : run.inspection.pores) {
    control.throw_if_cancelled();
    append(all, mesher.mesh_of(pore.id));
    arrays["pore_id"].resize(all.vertices_mm.size(), static_cast<float>(pore.id));
    arrays["volume_mm3"].resize(all.vertices_mm.size(), static_cast<float>(pore.volume_mm3.value));
    arrays["equivalent_diameter_mm"].resize(all.vertices_mm.size(),
                                            static_cast<float>(pore.equivalent_diameter_mm));
  }
  write_vtp(all, arrays, path);
}

// The labels of listed pores only: those left out are neither in pores.csv nor here.
RunLabels listed_labels(const InspectionRun& run) {
  std::vector<std::int32_t> ids;
  for (const Pore& pore : run.inspection.pores) ids.push_back(pore.id);
  std::sort(ids.begin(), ids.end());
  const RunLabels& all = run.found.field.labels;
  RunLabels kept(all.size());
  if (all.empty()) return kept;
  for (std::int64_t z = 0; z < all.size()[2]; ++z) {
    for (std::int64_t y = 0; y < all.size()[1]; ++y) {
      for (const LabelRun& r : all.row(y, z))
        if (std::binary_search(ids.begin(), ids.end(), r.label)) kept.add_run(r);
      kept.end_row();
    }
  }
  return kept;
}

void write_labels(const InspectionRun& run, const VolumeGeometry& geometry, const fs::path& path,
                  const RunControl& control) {
  const RunLabels labels = listed_labels(run);
  std::int32_t largest = 0;
  for (const LabelRun& r : labels.runs()) largest = std::max(largest, r.label);
  if (largest > most_float_label)
    throw Problem(ExitStatus::bad_data, "--write labels: more than 16777216 pores; pores.csv lists them all");
  const bool small = largest <= std::numeric_limits<std::uint16_t>::max();
  write_volume(LabelVolume(labels, geometry, small ? VoxelType::u16 : VoxelType::f32), path, control);
}

}  // namespace

void remove_stale_extras(const fs::path& folder, const std::set<std::string>& names) {
  for (const auto& [name, file] : files) {
    std::error_code ignored;
    if (names.count(name) == 0) fs::remove(folder / file, ignored);
  }
}

void check_extra_names(const std::set<std::string>& names) {
  for (const std::string& name : names) {
    if (files.count(name) == 0)
      throw Problem(ExitStatus::usage,
                    "--write " + name + ": is not known; choose of surface, thickness, pores, labels");
  }
}

void write_extras(const InspectionRun& run, const VolumeGeometry& geometry, const fs::path& folder,
                  const std::set<std::string>& names, OutputSet& outputs, const RunControl& control) {
  const auto write = [&](const char* name, auto&& writer) {
    if (!names.count(name)) return;
    control.throw_if_cancelled();
    const fs::path final_name = folder / files.at(name), temporary = outputs.temporary_for(final_name);
    writer(temporary);
    check_written(temporary, final_name);
  };
  write("surface", [&](const fs::path& path) { write_stl(run.surface, path); });
  write("thickness", [&](const fs::path& path) { write_thickness(run, path); });
  write("pores", [&](const fs::path& path) { write_pores(run, geometry, path, control); });
  write("labels", [&](const fs::path& path) { write_labels(run, geometry, path, control); });
}

}  // namespace halfmark
