// A volume whose voxels lie as plain bytes in one file: mapped, never held.
#pragma once

#include <filesystem>
#include <memory>
#include <string>

#include "io/volume_source.h"

namespace halfmark {

// Voxels that a geometry asks for, in bytes. Throws Problem(bad_data) when sizes are not positive or
// overflow.
std::uint64_t checked_byte_count(const VolumeGeometry& geometry, VoxelType type,
                                 const std::filesystem::path& file);
// Throws Problem(bad_data): spacing not finite or not positive, direction not orthonormal.
void check_geometry(const VolumeGeometry& geometry, const std::filesystem::path& file);

// Plain bytes from `offset` on. Throws Problem(bad_data) when the file is shorter than the header promises.
std::unique_ptr<VolumeSource> map_volume(const std::filesystem::path& file, std::uint64_t offset,
                                         const VolumeGeometry& geometry, VoxelType type, bool big_endian);
// zlib or gzip stream from `offset` on, inflated into memory.
std::unique_ptr<VolumeSource> inflate_volume(const std::filesystem::path& file, std::uint64_t offset,
                                             const VolumeGeometry& geometry, VoxelType type, bool big_endian,
                                             std::uint64_t skip_bytes = 0);

// `name` as a header gives it, resolved against the header's folder. Throws Problem(bad_data) if it leads out
// of it.
std::filesystem::path data_file_beside(const std::filesystem::path& header, const std::string& name);

// First bytes of a file, at most `count`. Throws Problem(input_missing, bad_data: empty).
std::string file_head(const std::filesystem::path& file, std::size_t count);

[[noreturn]] void refuse_file(const std::filesystem::path& file, const std::string& sentence);

}  // namespace halfmark
