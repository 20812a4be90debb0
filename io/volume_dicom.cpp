// DICOM series (DICONDE, ASTM E2339, is DICOM), through ITK's GDCM reader.
#include <itkGDCMImageIO.h>
#include <itkGDCMSeriesFileNames.h>
#include <itkImage.h>
#include <itkImageSeriesReader.h>
#include <itkMetaDataObject.h>

#include <cstring>

#include "io/file_volume.h"
#include "io/memory_volume.h"
#include "io/volume_formats.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

template <class T>
std::unique_ptr<VolumeSource> read_series(const std::vector<std::string>& files, VoxelType type,
                                          const fs::path& folder) {
  using Image = itk::Image<T, 3>;
  auto reader = itk::ImageSeriesReader<Image>::New();
  reader->SetImageIO(itk::GDCMImageIO::New());
  reader->SetFileNames(files);
  reader->Update();
  const Image* image = reader->GetOutput();
  VolumeGeometry geometry;
  for (unsigned a = 0; a < 3; ++a) {
    geometry.size[a] = static_cast<std::int64_t>(image->GetLargestPossibleRegion().GetSize()[a]);
    geometry.spacing_mm[a] = image->GetSpacing()[a];
    geometry.origin_mm[a] = image->GetOrigin()[a];
    for (unsigned b = 0; b < 3; ++b) geometry.direction[3 * a + b] = image->GetDirection()(a, b);
  }
  check_geometry(geometry, folder);
  checked_byte_count(geometry, type, folder);
  auto volume = std::make_unique<MemoryVolume>(geometry, type);
  std::memcpy(volume->data(), image->GetBufferPointer(),
              static_cast<std::size_t>(geometry.voxel_count()) * sizeof(T));
  return volume;
}

void read_scan_settings(const itk::MetaDataDictionary& tags, std::map<std::string, std::string>& scan) {
  for (const auto& [tag, name] :
       {std::pair{"0018|0060", "voltage_kv"}, std::pair{"0018|1151", "current_ma"},
        std::pair{"0018|1150", "exposure_ms"}, std::pair{"0018|1110", "source_detector_mm"},
        std::pair{"0018|1111", "source_object_mm"}, std::pair{"0018|1160", "filter"}}) {
    std::string value;
    if (itk::ExposeMetaData<std::string>(tags, tag, value)) {
      while (!value.empty() && (value.back() == ' ' || value.back() == '\0')) value.pop_back();
      if (!value.empty()) scan[name] = value;
    }
  }
}

}  // namespace

OpenedVolume open_dicom(const fs::path& folder) {
  OpenedVolume out;
  out.format = "DICOM";
  try {
    auto names = itk::GDCMSeriesFileNames::New();
    names->SetDirectory(folder.string());
    const auto& series = names->GetSeriesUIDs();
    if (series.empty()) refuse_file(folder, "holds no readable DICOM series");
    if (series.size() > 1)
      refuse_file(folder, "holds " + std::to_string(series.size()) +
                              " DICOM series; put the one to inspect into a folder of its own");
    const std::vector<std::string> files = names->GetFileNames(series.front());
    if (files.size() < 2) refuse_file(folder, "holds one DICOM slice only; a volume needs at least two");
    auto io = itk::GDCMImageIO::New();
    io->SetFileName(files.front());
    io->ReadImageInformation();
    if (io->GetNumberOfComponents() != 1)
      refuse_file(folder, "holds colour pictures; a grey-value volume has one value a voxel");
    switch (io->GetComponentType()) {
      case itk::IOComponentEnum::UCHAR:
        out.source = read_series<std::uint8_t>(files, VoxelType::u8, folder);
        break;
      case itk::IOComponentEnum::CHAR:
        out.source = read_series<std::int8_t>(files, VoxelType::i8, folder);
        break;
      case itk::IOComponentEnum::USHORT:
        out.source = read_series<std::uint16_t>(files, VoxelType::u16, folder);
        break;
      case itk::IOComponentEnum::SHORT:
        out.source = read_series<std::int16_t>(files, VoxelType::i16, folder);
        break;
      default:
        out.source = read_series<float>(files, VoxelType::f32, folder);
        break;
    }
    read_scan_settings(io->GetMetaDataDictionary(), out.scan);
    out.has_voxel_size = true;
    out.data_files.assign(files.begin(), files.end());
  } catch (const itk::ExceptionObject& error) {
    refuse_file(folder, std::string("cannot be read as a DICOM series: ") + error.GetDescription());
  }
  return out;
}

}  // namespace halfmark
