// One reader a format; volume_open.cpp chooses. Each throws Problem (input_missing, bad_data, io_error).
#pragma once

#include "io/volume_open.h"

namespace halfmark {

OpenedVolume open_metaimage(const std::filesystem::path& file);
OpenedVolume open_nrrd(const std::filesystem::path& file);
OpenedVolume open_nifti(const std::filesystem::path& file);
OpenedVolume open_raw(const std::filesystem::path& raw_or_json);
OpenedVolume open_tiff(const std::filesystem::path& file);
OpenedVolume open_tiff_folder(const std::filesystem::path& folder, std::vector<std::filesystem::path> slices);
OpenedVolume open_vti(const std::filesystem::path& file);
OpenedVolume open_dicom(const std::filesystem::path& folder);

// Slices of a folder in the order of the last number of their names. Throws Problem(bad_data) for gaps and
// doubles.
std::vector<std::filesystem::path> slices_by_number(const std::filesystem::path& folder,
                                                    std::vector<std::filesystem::path> files);

}  // namespace halfmark
