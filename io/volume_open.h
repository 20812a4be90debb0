// A path becomes a volume source: MetaImage, NRRD, TIFF (one file or a folder of numbered slices), raw with a
// JSON sidecar, DICOM series (DICONDE), VTK image data, NIfTI. Uncompressed MetaImage, NRRD, raw and TIFF
// slices are streamed by plane and never held whole.
#pragma once

#include <filesystem>
#include <map>
#include <memory>
#include <optional>
#include <string>
#include <vector>

#include "io/run_control.h"
#include "io/volume_source.h"

namespace halfmark {

struct OpenOptions {
  std::optional<Vec3> voxel_size_mm;  // overrides the file's voxel size
  RunControl control;
};

struct OpenedVolume {
  std::unique_ptr<VolumeSource> source;
  std::filesystem::path path;               // as given
  std::string format;                       // "MetaImage", "NRRD", "TIFF", ...
  bool has_voxel_size = false;              // false: the file tells none and none was given; 1 mm is assumed
  std::map<std::string, std::string> scan;  // scan settings the file tells, by plain name ("voltage_kv")
  std::vector<std::filesystem::path> data_files;  // every file that was read, in order
};

// Throws Problem: input_missing (no such path), bad_data (what is wrong in which file, and what to do),
// io_error.
OpenedVolume open_volume(const std::filesystem::path& path, const OpenOptions& options = {});

// SHA-256 over the data files' bytes in order, as 64 hexadecimal digits.
std::string sha256_of_files(const std::vector<std::filesystem::path>& files, const RunControl& control = {});

// Writes a volume in the format of the path's ending (.mha .mhd .nrrd .nhdr .tif .raw+.json .vti .nii
// .nii.gz), beside its final name and then renamed. Throws Problem (cannot_create, io_error, usage for an
// ending it cannot write).
void write_volume(const VolumeSource& source, const std::filesystem::path& path,
                  const RunControl& control = {});

}  // namespace halfmark
