// Volumes exchanged with ITK's and VTK's own readers and writers: what they write we read, what we write they
// read, the same voxels at the same places.
#include <itkGDCMImageIO.h>
#include <itkImage.h>
#include <itkImageFileReader.h>
#include <itkImageFileWriter.h>
#include <itkImageRegionIterator.h>
#include <itkImageSeriesReader.h>
#include <itkMetaDataObject.h>
#include <itkMetaImageIO.h>
#include <itkNiftiImageIO.h>
#include <itkNrrdImageIO.h>
#include <itkTIFFImageIO.h>
#include <vtkDataArray.h>
#include <vtkImageData.h>
#include <vtkMatrix3x3.h>
#include <vtkNew.h>
#include <vtkPointData.h>
#include <vtkXMLImageDataReader.h>
#include <vtkXMLImageDataWriter.h>

#include <algorithm>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <limits>
#include <random>
#include <string>
#include <type_traits>
#include <vector>

#include "io/memory_volume.h"
#include "io/problem.h"
#include "io/volume_open.h"
#include "tests/support/catch.h"
#include "tests/support/dicom_files.h"
#include "tests/support/temporary_folder.h"

namespace fs = std::filesystem;
using namespace halfmark;

namespace {

constexpr VoxelType all_types[] = {VoxelType::u8, VoxelType::i8, VoxelType::u16, VoxelType::i16,
                                   VoxelType::f32};
// NIfTI keeps places as floats.
constexpr double float_places = 2e-6, double_places = 1e-12;

enum class Turn { none, quarter, tilted, mirrored };

MemoryVolume random_volume(VoxelType type, unsigned seed, Turn turn) {
  std::mt19937 random(seed);
  VolumeGeometry g;
  for (auto& n : g.size) n = 2 + static_cast<std::int64_t>(random() % 9);
  g.spacing_mm = {0.125, 0.2, 0.3125};
  g.origin_mm = {1.5, -2.25, 30.125};
  if (turn == Turn::quarter) g.direction = {0, -1, 0, 1, 0, 0, 0, 0, 1};
  if (turn == Turn::tilted) g.direction = {0.6, 0, 0.8, 0, 1, 0, -0.8, 0, 0.6};
  if (turn == Turn::mirrored) g.direction = {1, 0, 0, 0, 1, 0, 0, 0, -1};  // left-handed
  MemoryVolume volume(g, type);
  visit_voxel_type(type, [&](auto* t) {
    using T = std::remove_pointer_t<decltype(t)>;
    for (std::int64_t i = 0; i < g.voxel_count(); ++i)
      volume.voxels<T>()[i] = std::is_integral_v<T>
                                  ? static_cast<T>(random())
                                  : static_cast<T>(static_cast<double>(random()) / 7e5 - 2000);
  });
  return volume;
}

std::vector<std::byte> bytes_of(const VolumeSource& v) {
  std::vector<std::byte> out(static_cast<std::size_t>(v.geometry().voxel_count()) *
                             bytes_per_voxel(v.voxel_type()));
  v.read_planes(0, v.geometry().size[2], out.data());
  return out;
}

// Both volumes' voxels are the same, at the same places (three corners apart from the first suffice).
void check_same(const VolumeSource& a, const VolumeSource& b, double tolerance_mm) {
  REQUIRE(a.geometry().size == b.geometry().size);
  REQUIRE(a.voxel_type() == b.voxel_type());
  CHECK((bytes_of(a) == bytes_of(b)));
  for (const Vec3& index : {Vec3{0, 0, 0}, Vec3{7, 0, 0}, Vec3{0, 5, 0}, Vec3{0, 0, 9}}) {
    const Vec3 p = a.geometry().index_to_mm(index), q = b.geometry().index_to_mm(index);
    INFO("index " << index[0] << " " << index[1] << " " << index[2] << ": " << p[0] << " " << p[1] << " "
                  << p[2] << " mm against " << q[0] << " " << q[1] << " " << q[2] << " mm");
    CHECK(length(p - q) <= tolerance_mm * (1 + length(p)));
  }
}

template <class T>
typename itk::Image<T, 3>::Pointer to_itk(const MemoryVolume& volume) {
  using Image = itk::Image<T, 3>;
  const VolumeGeometry& g = volume.geometry();
  auto image = Image::New();
  typename Image::SizeType size;
  typename Image::SpacingType spacing;
  typename Image::PointType origin;
  typename Image::DirectionType direction;
  for (unsigned a = 0; a < 3; ++a) {
    size[a] = static_cast<itk::SizeValueType>(g.size[a]);
    spacing[a] = g.spacing_mm[a];
    origin[a] = g.origin_mm[a];
    for (unsigned b = 0; b < 3; ++b) direction(a, b) = g.direction[3 * a + b];
  }
  image->SetRegions(typename Image::RegionType(size));
  image->SetSpacing(spacing);
  image->SetOrigin(origin);
  image->SetDirection(direction);
  image->Allocate();
  std::memcpy(image->GetBufferPointer(), volume.voxels<T>(),
              static_cast<std::size_t>(g.voxel_count()) * sizeof(T));
  return image;
}

template <class T>
MemoryVolume from_itk(const itk::Image<T, 3>* image, VoxelType type) {
  VolumeGeometry g;
  for (unsigned a = 0; a < 3; ++a) {
    g.size[a] = static_cast<std::int64_t>(image->GetLargestPossibleRegion().GetSize()[a]);
    g.spacing_mm[a] = image->GetSpacing()[a];
    g.origin_mm[a] = image->GetOrigin()[a];
    for (unsigned b = 0; b < 3; ++b) g.direction[3 * a + b] = image->GetDirection()(a, b);
  }
  MemoryVolume out(g, type);
  std::memcpy(out.data(), image->GetBufferPointer(), static_cast<std::size_t>(g.voxel_count()) * sizeof(T));
  return out;
}

template <class T>
void write_with_itk(const MemoryVolume& volume, itk::ImageIOBase* io, const fs::path& file, bool compressed) {
  auto writer = itk::ImageFileWriter<itk::Image<T, 3>>::New();
  writer->SetImageIO(io);
  writer->SetInput(to_itk<T>(volume));
  writer->SetFileName(file.string());
  writer->SetUseCompression(compressed);
  writer->Update();
}

template <class T>
MemoryVolume read_with_itk(itk::ImageIOBase* io, const fs::path& file, VoxelType type) {
  // The file's own voxel type must be the one asked for: ITK would convert.
  io->SetFileName(file.string());
  io->ReadImageInformation();
  CHECK(io->GetComponentType() == itk::ImageIOBase::MapPixelType<T>::CType);
  auto reader = itk::ImageFileReader<itk::Image<T, 3>>::New();
  reader->SetImageIO(io);
  reader->SetFileName(file.string());
  reader->Update();
  return from_itk<T>(reader->GetOutput(), type);
}

// Writes with ITK and reads with ours, then the other way round, for every voxel type.
template <class MakeIo>
void exchange(const std::string& written, const std::string& read, MakeIo make_io, bool compressed, Turn turn,
              double tolerance_mm) {
  const TemporaryFolder folder;
  for (const VoxelType type : all_types) {
    for (unsigned seed = 1; seed <= 3; ++seed) {
      INFO(written << ", compressed " << compressed << ", turn " << static_cast<int>(turn) << ", type "
                   << static_cast<int>(type) << ", seed " << seed);
      const MemoryVolume truth = random_volume(type, seed, turn);
      visit_voxel_type(type, [&](auto* t) {
        using T = std::remove_pointer_t<decltype(t)>;
        write_with_itk<T>(truth, make_io(), folder / written, compressed);
        check_same(*open_volume(folder / written).source, truth, tolerance_mm);
        write_volume(truth, folder / read);
        check_same(read_with_itk<T>(make_io(), folder / read, type), truth, tolerance_mm);
      });
    }
  }
}

// The reverse of each voxel's bytes, from `offset` on.
void turn_bytes(std::string& bytes, std::size_t offset, std::size_t width) {
  for (std::size_t i = offset; i + width <= bytes.size(); i += width)
    std::reverse(bytes.begin() + static_cast<std::ptrdiff_t>(i),
                 bytes.begin() + static_cast<std::ptrdiff_t>(i + width));
}

std::string file_bytes(const fs::path& file) {
  std::ifstream in(file, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}

void replace(std::string& text, const std::string& from, const std::string& to) {
  const std::size_t at = text.find(from);
  INFO(from);
  REQUIRE(at != std::string::npos);
  text.replace(at, from.size(), to);
}

}  // namespace

TEST_CASE("MetaImage agrees with ITK both ways") {
  const auto io = [] { return itk::MetaImageIO::New(); };
  for (const Turn turn : {Turn::none, Turn::quarter, Turn::tilted, Turn::mirrored})
    exchange("i.mha", "o.mha", io, false, turn, double_places);
  exchange("c.mha", "o.mha", io, true, Turn::tilted, double_places);
  exchange("i.mhd", "o.mhd", io, false, Turn::tilted, double_places);
  exchange("c.mhd", "o.mhd", io, true, Turn::tilted, double_places);
}

TEST_CASE("NRRD agrees with ITK both ways") {
  const auto io = [] { return itk::NrrdImageIO::New(); };
  for (const Turn turn : {Turn::none, Turn::quarter, Turn::tilted, Turn::mirrored})
    exchange("i.nrrd", "o.nrrd", io, false, turn, double_places);
  exchange("c.nrrd", "o.nrrd", io, true, Turn::tilted, double_places);
  exchange("i.nhdr", "o.nhdr", io, false, Turn::tilted, double_places);
  exchange("c.nhdr", "o.nhdr", io, true, Turn::tilted, double_places);
}

TEST_CASE("NIfTI agrees with ITK both ways") {
  const auto io = [] { return itk::NiftiImageIO::New(); };
  for (const Turn turn : {Turn::none, Turn::quarter, Turn::tilted, Turn::mirrored})
    exchange("i.nii", "o.nii", io, false, turn, float_places);
  exchange("i.nii.gz", "o.nii.gz", io, true, Turn::tilted, float_places);
}

TEST_CASE("big-endian files of each format are read as ITK reads them") {
  const TemporaryFolder folder;
  for (const VoxelType type : {VoxelType::u16, VoxelType::i16, VoxelType::f32}) {
    INFO("type " << static_cast<int>(type));
    const MemoryVolume truth = random_volume(type, 5, Turn::tilted);
    const std::size_t width = bytes_per_voxel(type),
                      count = static_cast<std::size_t>(truth.geometry().voxel_count()) * width;
    for (const std::string name : {"b.mha", "b.nrrd"}) {
      write_volume(truth, folder / name);
      std::string bytes = file_bytes(folder / name);
      const std::size_t head = bytes.size() - count;
      turn_bytes(bytes, head, width);
      if (name == "b.mha") replace(bytes, "BinaryDataByteOrderMSB = False", "BinaryDataByteOrderMSB = True");
      if (name == "b.nrrd") replace(bytes, "endian: little", "endian: big");
      std::ofstream(folder / name, std::ios::binary) << bytes;
      INFO(name);
      check_same(*open_volume(folder / name).source, truth, double_places);
      visit_voxel_type(type, [&](auto* t) {
        using T = std::remove_pointer_t<decltype(t)>;
        itk::ImageIOBase::Pointer io;
        if (name == "b.mha") io = itk::MetaImageIO::New().GetPointer();
        if (name == "b.nrrd") io = itk::NrrdImageIO::New().GetPointer();
        check_same(read_with_itk<T>(io, folder / name, type), truth, double_places);
      });
    }
    // NIfTI turns its header too: fields of four and two bytes.
    write_volume(truth, folder / "b.nii");
    std::string bytes = file_bytes(folder / "b.nii");
    turn_bytes(bytes, 352, width);
    const auto turn_field = [&](std::size_t at, std::size_t field, std::size_t fields) {
      std::string part = bytes.substr(at, field * fields);
      turn_bytes(part, 0, field);
      bytes.replace(at, part.size(), part);
    };
    turn_field(0, 4, 1);     // sizeof_hdr
    turn_field(32, 4, 1);    // extents
    turn_field(36, 2, 1);    // session_error
    turn_field(40, 2, 8);    // dim
    turn_field(56, 4, 3);    // intents
    turn_field(68, 2, 4);    // intent_code, datatype, bitpix, slice_start
    turn_field(76, 4, 11);   // pixdim, vox_offset, scl_slope, scl_inter
    turn_field(120, 2, 1);   // slice_end
    turn_field(124, 4, 6);   // cal_max ... glmin
    turn_field(252, 2, 2);   // qform_code, sform_code
    turn_field(256, 4, 18);  // quaternion, offsets, affine rows
    std::ofstream(folder / "b.nii", std::ios::binary) << bytes;
    check_same(*open_volume(folder / "b.nii").source, truth, float_places);
    visit_voxel_type(type, [&](auto* t) {
      using T = std::remove_pointer_t<decltype(t)>;
      check_same(read_with_itk<T>(itk::NiftiImageIO::New(), folder / "b.nii", type), truth, float_places);
    });
  }
}

TEST_CASE("grey values that a NIfTI header scales are read as ITK reads them") {
  const TemporaryFolder folder;
  for (const VoxelType type : {VoxelType::u8, VoxelType::i16}) {
    write_volume(random_volume(type, 3, Turn::quarter), folder / "s.nii");
    std::string bytes = file_bytes(folder / "s.nii");
    const float slope = -0.75f, intercept = 12.5f;
    std::memcpy(bytes.data() + 112, &slope, 4);
    std::memcpy(bytes.data() + 116, &intercept, 4);
    std::ofstream(folder / "s.nii", std::ios::binary) << bytes;
    auto reader = itk::ImageFileReader<itk::Image<float, 3>>::New();
    reader->SetImageIO(itk::NiftiImageIO::New());
    reader->SetFileName((folder / "s.nii").string());
    reader->Update();
    check_same(*open_volume(folder / "s.nii").source, from_itk<float>(reader->GetOutput(), VoxelType::f32),
               float_places);
  }
}

TEST_CASE("TIFF pages agree with ITK both ways") {
  const TemporaryFolder folder;
  for (const VoxelType type : all_types) {
    for (const bool compressed : {false, true}) {
      INFO("type " << static_cast<int>(type) << ", compressed " << compressed);
      MemoryVolume truth = random_volume(type, 7, Turn::none);
      const auto same_voxels = [&](const VolumeSource& read) {
        REQUIRE(read.geometry().size == truth.geometry().size);
        REQUIRE(read.voxel_type() == type);
        CHECK((bytes_of(read) == bytes_of(truth)));
      };
      visit_voxel_type(type, [&](auto* t) {
        using T = std::remove_pointer_t<decltype(t)>;
        write_with_itk<T>(truth, itk::TIFFImageIO::New(), folder / "i.tif", compressed);
        same_voxels(*open_volume(folder / "i.tif").source);
        write_volume(truth, folder / "o.tif");
        same_voxels(read_with_itk<T>(itk::TIFFImageIO::New(), folder / "o.tif", type));
      });
    }
  }
}

TEST_CASE("VTK image data agrees with VTK both ways") {
  const TemporaryFolder folder;
  const int vtk_types[] = {VTK_UNSIGNED_CHAR, VTK_SIGNED_CHAR, VTK_UNSIGNED_SHORT, VTK_SHORT, VTK_FLOAT};
  for (const VoxelType type : all_types) {
    for (int form = 0; form < 8; ++form) {
      INFO("type " << static_cast<int>(type) << ", form " << form);
      const MemoryVolume truth = random_volume(type, 11, form % 2 == 0 ? Turn::tilted : Turn::none);
      const VolumeGeometry& g = truth.geometry();
      vtkNew<vtkImageData> image;
      // The extent need not begin at 0: the origin belongs to index 0.
      const int shift = form >= 6 ? 3 : 0;
      image->SetExtent(shift, shift + static_cast<int>(g.size[0]) - 1, 0, static_cast<int>(g.size[1]) - 1, 0,
                       static_cast<int>(g.size[2]) - 1);
      image->SetSpacing(g.spacing_mm.data());
      image->SetDirectionMatrix(g.direction.data());
      const Vec3 origin = g.index_to_mm({-1.0 * shift, 0, 0});
      image->SetOrigin(origin.data());
      image->AllocateScalars(vtk_types[static_cast<int>(type)], 1);
      std::memcpy(image->GetScalarPointer(), truth.resident(), bytes_of(truth).size());
      vtkNew<vtkXMLImageDataWriter> writer;
      writer->SetInputData(image);
      writer->SetFileName((folder / "i.vti").c_str());
      if (form % 3 == 0) writer->SetDataModeToAppended();
      if (form % 3 == 1) writer->SetDataModeToBinary();
      if (form % 3 == 2) writer->SetDataModeToAscii();
      writer->SetEncodeAppendedData(form >= 3);
      if (form % 2 == 1) writer->SetCompressorTypeToNone();
      if (form == 4) writer->SetByteOrderToBigEndian();
      writer->Write();
      if (form % 3 != 2 || type != VoxelType::f32) {  // decimals of floats as text may be cut
        check_same(*open_volume(folder / "i.vti").source, truth, 1e-9);
      }
      write_volume(truth, folder / "o.vti");
      vtkNew<vtkXMLImageDataReader> reader;
      reader->SetFileName((folder / "o.vti").c_str());
      reader->Update();
      vtkImageData* back = reader->GetOutput();
      REQUIRE(back->GetPointData()->GetScalars() != nullptr);
      CHECK(back->GetScalarType() == vtk_types[static_cast<int>(type)]);
      VolumeGeometry read;
      for (std::size_t a = 0; a < 3; ++a) {
        read.size[a] = back->GetDimensions()[a];
        read.spacing_mm[a] = back->GetSpacing()[a];
        read.origin_mm[a] = back->GetOrigin()[a];
      }
      std::memcpy(read.direction.data(), back->GetDirectionMatrix()->GetData(), sizeof read.direction);
      REQUIRE(read.size == g.size);
      MemoryVolume of_vtk(read, type);
      std::memcpy(of_vtk.data(), back->GetScalarPointer(), bytes_of(truth).size());
      check_same(of_vtk, truth, 1e-9);
    }
  }
}

TEST_CASE("no flipped byte of packed VTK image data goes unnoticed") {
  const TemporaryFolder folder;
  const MemoryVolume truth = random_volume(VoxelType::u16, 2, Turn::none);
  vtkNew<vtkImageData> image;
  image->SetDimensions(static_cast<int>(truth.geometry().size[0]), static_cast<int>(truth.geometry().size[1]),
                       static_cast<int>(truth.geometry().size[2]));
  image->AllocateScalars(VTK_UNSIGNED_SHORT, 1);
  std::memcpy(image->GetScalarPointer(), truth.resident(), bytes_of(truth).size());
  vtkNew<vtkXMLImageDataWriter> writer;
  writer->SetInputData(image);
  writer->SetFileName((folder / "p.vti").c_str());
  writer->SetDataModeToAppended();
  writer->EncodeAppendedDataOff();
  writer->Write();
  const std::string whole = file_bytes(folder / "p.vti");
  const std::size_t data = whole.find("<AppendedData") + 30, end = whole.find("</AppendedData>");
  int unnoticed = 0, flips = 0;
  for (std::size_t at = data; at < end; at += 3, ++flips) {
    std::string bytes = whole;
    bytes[at] = static_cast<char>(bytes[at] ^ 0x10);
    std::ofstream(folder / "p.vti", std::ios::binary) << bytes;
    try {
      unnoticed += bytes_of(*open_volume(folder / "p.vti").source) == bytes_of(truth) ? 0 : 1;
    } catch (const Problem&) {
    }
  }
  // Blocks that claim 4 GiB each, in the header's second number.
  std::string huge = whole;
  huge.replace(whole.find('_', whole.find("<AppendedData")) + 5, 4, "\xf0\xff\xff\xff");
  std::ofstream(folder / "p.vti", std::ios::binary) << huge;
  try {
    open_volume(folder / "p.vti");
    CHECK(false);
  } catch (const Problem& problem) {
    INFO(problem.what());
    CHECK(std::string(problem.what()).find("claim more than") != std::string::npos);
  }
  INFO(unnoticed << " of " << flips << " flips");
  CHECK(flips > 50);
  CHECK(unnoticed == 0);
}

TEST_CASE("a DICOM series is read as ITK reads it, plain and compressed") {
  const TemporaryFolder folder;
  std::vector<std::string> names;
  for (int k = 0; k < 4; ++k) {
    DicomSlice slice;
    slice.columns = 16;
    slice.rows = 12;
    slice.number = k + 1;
    slice.is_signed = true;
    slice.position = "4.5\\-1.25\\" + std::to_string(2 + 0.5 * k);
    slice.orientation = "0.6\\0\\-0.8\\0\\1\\0";
    std::mt19937 random(static_cast<unsigned>(k));
    for (int i = 0; i < 192; ++i) slice.voxels.push_back(static_cast<std::uint16_t>(random() % 3000 - 1000));
    // The slices must lie along their normal, which is turned: (0.8, 0, 0.6).
    const double at = 0.5 * k;
    slice.position = std::to_string(4.5 + 0.8 * at) + "\\-1.25\\" + std::to_string(2 + 0.6 * at);
    names.push_back((folder / (std::to_string(k) + ".dcm")).string());
    std::ofstream(names.back(), std::ios::binary) << dicom_bytes(slice);
  }
  using Image = itk::Image<std::int16_t, 3>;
  auto reader = itk::ImageSeriesReader<Image>::New();
  reader->SetImageIO(itk::GDCMImageIO::New());
  reader->SetFileNames(names);
  reader->Update();
  const MemoryVolume of_itk = from_itk<std::int16_t>(reader->GetOutput(), VoxelType::i16);
  const OpenedVolume plain = open_volume(folder.path());
  check_same(*plain.source, of_itk, 1e-6);

  // Each slice again, packed without loss.
  const TemporaryFolder packed;
  for (std::size_t k = 0; k < names.size(); ++k) {
    using Slice = itk::Image<std::int16_t, 2>;
    auto io = itk::GDCMImageIO::New();
    auto one = itk::ImageFileReader<Slice>::New();
    one->SetImageIO(io);
    one->SetFileName(names[k]);
    one->Update();
    auto out = itk::GDCMImageIO::New();
    out->SetKeepOriginalUID(true);
    out->SetMetaDataDictionary(io->GetMetaDataDictionary());
    out->SetCompressionType(itk::GDCMImageIO::CompressionEnum::JPEG2000);
    auto writer = itk::ImageFileWriter<Slice>::New();
    writer->SetImageIO(out);
    writer->SetUseInputMetaDataDictionary(false);
    writer->SetInput(one->GetOutput());
    writer->SetUseCompression(true);
    writer->SetFileName((packed / (std::to_string(9 - k) + ".dcm")).string());
    writer->Update();
  }
  check_same(*open_volume(packed.path()).source, *plain.source, 1e-6);
}
