// The real volume of ../shared/real_volumes: foamed cement, 128^3 voxels of 8 bit, air pores of 2 to 30
// voxels, material filling the field.
#pragma once

#include <itkImageFileReader.h>
#include <itkTIFFImageIO.h>

#include <cstring>
#include <filesystem>
#include <memory>
#include <optional>

#include "io/memory_volume.h"

namespace halfmark::tests {

inline std::filesystem::path cement_path() {
  return std::filesystem::path(HALFMARK_SOURCE_DIR) / "../shared/real_volumes/cement_128x128x128.tif";
}

// Nothing where the file is not there.
inline std::optional<MemoryVolume> cement_volume(double voxel_mm = 0.01) {
  if (!std::filesystem::exists(cement_path())) return std::nullopt;
  using Image = itk::Image<std::uint8_t, 3>;
  const auto reader = itk::ImageFileReader<Image>::New();
  reader->SetImageIO(itk::TIFFImageIO::New());
  reader->SetFileName(cement_path().string());
  reader->Update();
  const auto size = reader->GetOutput()->GetLargestPossibleRegion().GetSize();
  VolumeGeometry geometry;
  for (std::size_t k = 0; k < 3; ++k) geometry.size[k] = static_cast<std::int64_t>(size[k]);
  geometry.spacing_mm = {voxel_mm, voxel_mm, voxel_mm};
  MemoryVolume volume(geometry, VoxelType::u8);
  std::memcpy(volume.data(), reader->GetOutput()->GetBufferPointer(),
              static_cast<std::size_t>(geometry.voxel_count()));
  return volume;
}

}  // namespace halfmark::tests
