// One DICOM file (PS3.5, PS3.10): what a slice needs of its header, and where its voxels lie. Reads explicit
// and implicit little endian itself, so that no damaged file gets further than its first wrong length.
#pragma once

#include <array>
#include <cstdint>
#include <filesystem>
#include <map>
#include <optional>
#include <string>
#include <vector>

#include "io/vec3.h"

namespace halfmark {

struct DicomFile {
  std::filesystem::path path;
  std::string series;  // SeriesInstanceUID
  long number = 0;     // InstanceNumber
  std::int64_t columns = 0, rows = 0, frames = 1;
  int bits_allocated = 0, bits_stored = 0, high_bit = 0;
  bool is_signed = false, is_float = false;
  double slope = 1, intercept = 0;  // of the stored value, to the grey value
  Vec3 row_direction{1, 0, 0}, column_direction{0, 1, 0};
  std::array<double, 2> spacing_mm{1, 1};  // along the row (x), along the column (y)
  bool has_spacing = false;
  std::optional<double> slice_spacing_mm;   // as the header tells, for want of positions
  std::vector<Vec3> positions_mm;           // of each frame's first voxel; may be empty
  std::map<std::string, std::string> scan;  // by plain name ("voltage_kv")
  bool compressed = false;
  std::uint64_t voxel_offset = 0, voxel_bytes = 0;

  std::uint64_t frame_bytes() const {
    return static_cast<std::uint64_t>(columns * rows) * static_cast<std::uint64_t>(bits_allocated / 8);
  }
  // Least and largest grey value its bits can hold.
  std::array<double, 2> grey_range() const;
};

// Whether the file has the DICOM mark.
bool is_dicom_file(const std::filesystem::path& file);
// Throws Problem(bad_data, input_missing): truncated, damaged, colour, no picture, a form that is not read.
DicomFile read_dicom_header(const std::filesystem::path& file);

}  // namespace halfmark
