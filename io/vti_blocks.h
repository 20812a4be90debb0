// The packed blocks of VTK image data, looked at before VTK takes memory for what they claim.
#pragma once

#include <cstdint>
#include <filesystem>
#include <string>

namespace halfmark {

// Throws Problem(bad_data) where the blocks of an array claim more than a volume of so many voxels can fill,
// or more than the file holds. `head`: the file's first bytes; arrays whose beginnings lie behind it are not
// looked at.
void check_packed_blocks(const std::filesystem::path& file, const std::string& head, std::int64_t voxels);

}  // namespace halfmark
