// DICOM series (DICONDE, ASTM E2339, is DICOM): slices put in order by their positions and checked. Plain
// voxels are read here by the plane; compressed ones through ITK's GDCM reader, whole.
#include <itkGDCMImageIO.h>

#include <algorithm>
#include <bit>
#include <cctype>
#include <cmath>
#include <cstdio>
#include <cstring>
#include <fstream>
#include <limits>
#include <set>
#include <type_traits>

#include "io/dicom_file.h"
#include "io/file_volume.h"
#include "io/memory_volume.h"
#include "io/volume_formats.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

// Positions are written with few digits; a gap differs from the others by more than this share of it when a
// slice is missing or lies elsewhere.
constexpr double gap_tolerance = 0.02;
// Compressed pictures grow by no more than this; what promises more is damaged.
constexpr std::uint64_t largest_expansion = 1 << 16;

struct Frame {
  std::size_t file = 0;  // in the list of files
  std::int64_t frame = 0;
  Vec3 position_mm{};
  std::string name;  // for sentences
};

Vec3 normal_of(const DicomFile& file) { return cross(file.row_direction, file.column_direction); }

void check_agreement(const std::vector<DicomFile>& files) {
  const DicomFile& first = files.front();
  const auto text = [](const DicomFile& f) {
    return std::to_string(f.columns) + " x " + std::to_string(f.rows);
  };
  for (const DicomFile& f : files) {
    if (f.columns != first.columns || f.rows != first.rows)
      refuse_file(f.path, "differs in size from the first slice (" + text(f) + " against " + text(first) +
                              "); all must agree");
    if (!(length(f.row_direction - first.row_direction) < 1e-3) ||
        !(length(f.column_direction - first.column_direction) < 1e-3))
      refuse_file(f.path, "is turned against the first slice; a volume needs parallel slices");
    for (std::size_t a = 0; a < 2; ++a) {
      if (!(std::abs(f.spacing_mm[a] / first.spacing_mm[a] - 1) < 1e-4))
        refuse_file(f.path, "differs in voxel size from the first slice; all must agree");
    }
  }
}

// Along the slices' normal; their distance must be even. Returns it.
double order_by_position(std::vector<Frame>& frames, const Vec3& normal, const fs::path& folder) {
  const auto height = [&](const Frame& f) { return dot(f.position_mm, normal); };
  std::stable_sort(frames.begin(), frames.end(),
                   [&](const Frame& a, const Frame& b) { return height(a) < height(b); });
  std::vector<double> gaps;
  for (std::size_t i = 1; i < frames.size(); ++i) gaps.push_back(height(frames[i]) - height(frames[i - 1]));
  for (std::size_t i = 0; i < gaps.size(); ++i) {
    if (!(gaps[i] > 1e-9))
      refuse_file(folder,
                  "two slices lie at the same place: " + frames[i].name + " and " + frames[i + 1].name);
  }
  std::vector<double> sorted = gaps;
  std::nth_element(sorted.begin(), sorted.begin() + static_cast<std::ptrdiff_t>(sorted.size() / 2),
                   sorted.end());
  const double usual = sorted[sorted.size() / 2];
  for (std::size_t i = 0; i < gaps.size(); ++i) {
    const std::string pair = frames[i].name + " and " + frames[i + 1].name;
    if (!(std::abs(gaps[i] / usual - 1) < gap_tolerance)) {
      char text[120];
      std::snprintf(text, sizeof text, "%.6g mm apart, the others %.6g mm", gaps[i], usual);
      refuse_file(folder, "a slice is missing or misplaced: " + pair + " are " + text);
    }
    const Vec3 step = frames[i + 1].position_mm - frames[i].position_mm;
    if (length(step - gaps[i] * normal) > gap_tolerance * usual)
      refuse_file(folder, "the slices are shifted sideways against each other (" + pair +
                              "); resample the volume on a straight grid");
  }
  return (height(frames.back()) - height(frames.front())) / static_cast<double>(gaps.size());
}

// For want of positions: by the slices' numbers; the frames of one file lie in order.
void order_by_number(std::vector<DicomFile>& files, const fs::path& folder) {
  std::stable_sort(files.begin(), files.end(),
                   [](const DicomFile& a, const DicomFile& b) { return a.number < b.number; });
  for (std::size_t i = 1; i < files.size(); ++i) {
    if (files[i].number != files[i - 1].number + 1)
      refuse_file(folder, "the slices have no positions, and their numbers are not one after the other (" +
                              files[i - 1].path.filename().string() + ", " +
                              files[i].path.filename().string() + "); their order is not known");
  }
}

std::vector<Frame> frames_of(const std::vector<DicomFile>& files) {
  std::vector<Frame> out;
  for (std::size_t i = 0; i < files.size(); ++i) {
    const std::string name = files[i].path.filename().string();
    for (std::int64_t k = 0; k < files[i].frames; ++k) {
      const auto at = static_cast<std::size_t>(k);
      out.push_back({i, k, at < files[i].positions_mm.size() ? files[i].positions_mm[at] : Vec3{},
                     files[i].frames > 1 ? name + ", frame " + std::to_string(k) : name});
    }
  }
  return out;
}

bool is_plain(const DicomFile& f) { return f.slope == 1 && f.intercept == 0; }

// The narrowest type that holds every slice's grey values exactly, as far as there is one.
VoxelType voxel_type(const std::vector<DicomFile>& files) {
  double low = 0, high = 0;
  bool whole = true, plain = true;
  const int width = files.front().bits_allocated;
  for (const DicomFile& f : files) {
    const auto [least, most] = f.grey_range();
    low = std::min(low, least);
    high = std::max(high, most);
    whole = whole && !f.is_float && f.slope == std::floor(f.slope) && f.intercept == std::floor(f.intercept);
    plain = plain && is_plain(f) && f.bits_allocated == width && f.is_signed == files.front().is_signed;
  }
  if (!whole) return VoxelType::f32;
  if (plain && width == 8) return files.front().is_signed ? VoxelType::i8 : VoxelType::u8;
  if (plain && width == 16) return files.front().is_signed ? VoxelType::i16 : VoxelType::u16;
  if (low >= 0 && high <= 65535) return VoxelType::u16;
  return low >= -32768 && high <= 32767 ? VoxelType::i16 : VoxelType::f32;
}

template <class T>
void put_grey(double value, std::byte* out) {
  if constexpr (std::is_integral_v<T>)
    value = std::clamp<double>(value, std::numeric_limits<T>::min(), std::numeric_limits<T>::max());
  const T grey = static_cast<T>(value);
  std::memcpy(out, &grey, sizeof grey);
}

// The stored bits, without what lies beside them, as a number.
double stored_value(const std::byte* bytes, const DicomFile& f) {
  std::uint32_t raw = 0;
  const int width = f.bits_allocated / 8;
  for (int i = 0; i < width; ++i) raw |= static_cast<std::uint32_t>(bytes[i]) << (8 * i);
  if (f.is_float) {
    float value = 0;
    std::memcpy(&value, &raw, sizeof value);
    return value;
  }
  const std::uint64_t mask = (std::uint64_t{1} << f.bits_stored) - 1;
  const std::uint64_t value = (raw >> (f.high_bit + 1 - f.bits_stored)) & mask;
  const bool negative = f.is_signed && (value >> (f.bits_stored - 1)) != 0;
  return static_cast<double>(value) - (negative ? static_cast<double>(mask) + 1 : 0);
}

// One frame's bytes as they stand in the file, in the form `file` tells, to voxels of `type`.
void to_grey(const std::byte* bytes, const DicomFile& file, VoxelType type, std::byte* out) {
  const auto count = static_cast<std::size_t>(file.columns * file.rows),
             width = static_cast<std::size_t>(file.bits_allocated / 8);
  const bool as_stored = is_plain(file) && file.bits_stored == file.bits_allocated &&
                         width == bytes_per_voxel(type) && std::endian::native == std::endian::little &&
                         file.is_float == (type == VoxelType::f32);
  if (as_stored) {
    std::memcpy(out, bytes, count * width);
    return;
  }
  visit_voxel_type(type, [&](auto* t) {
    using T = std::remove_pointer_t<decltype(t)>;
    for (std::size_t i = 0; i < count; ++i)
      put_grey<T>(stored_value(bytes + i * width, file) * file.slope + file.intercept, out + i * sizeof(T));
  });
}

template <class From>
void converted(const std::vector<std::byte>& bytes, VoxelType type, std::byte* out) {
  visit_voxel_type(type, [&](auto* t) {
    using T = std::remove_pointer_t<decltype(t)>;
    for (std::size_t i = 0; i < bytes.size() / sizeof(From); ++i) {
      From value;
      std::memcpy(&value, bytes.data() + i * sizeof value, sizeof value);
      put_grey<T>(static_cast<double>(value), out + i * sizeof(T));
    }
  });
}

// All frames of a compressed file, rescaled, as voxels of `type`.
void decompress(const DicomFile& file, VoxelType type, std::byte* out) {
  auto io = itk::GDCMImageIO::New();
  io->SetFileName(file.path.string());
  std::vector<std::byte> bytes;
  bool fits = false;
  try {
    io->ReadImageInformation();
    const std::uint64_t frames = io->GetNumberOfDimensions() > 2 ? io->GetDimensions(2) : 1;
    fits = io->GetNumberOfComponents() == 1 &&
           static_cast<std::int64_t>(io->GetDimensions(0)) == file.columns &&
           static_cast<std::int64_t>(io->GetDimensions(1)) == file.rows &&
           static_cast<std::int64_t>(frames) == file.frames;
    if (fits) bytes.resize(static_cast<std::size_t>(io->GetImageSizeInBytes()));
    if (fits) io->Read(bytes.data());
  } catch (const itk::ExceptionObject&) {
    fits = false;
  }
  using Component = itk::IOComponentEnum;
  const Component component = io->GetComponentType();
  if (fits && component == Component::UCHAR) return converted<std::uint8_t>(bytes, type, out);
  if (fits && component == Component::CHAR) return converted<std::int8_t>(bytes, type, out);
  if (fits && component == Component::USHORT) return converted<std::uint16_t>(bytes, type, out);
  if (fits && component == Component::SHORT) return converted<std::int16_t>(bytes, type, out);
  if (fits && component == Component::UINT) return converted<std::uint32_t>(bytes, type, out);
  if (fits && component == Component::INT) return converted<std::int32_t>(bytes, type, out);
  if (fits && component == Component::FLOAT) return converted<float>(bytes, type, out);
  if (fits && component == Component::DOUBLE) return converted<double>(bytes, type, out);
  refuse_file(file.path, "its compressed voxels cannot be read; export the series without compression");
}

// Slices without compression, read when they are asked for.
class DicomVolume : public VolumeSource {
 public:
  DicomVolume(std::vector<DicomFile> files, std::vector<Frame> frames, const VolumeGeometry& geometry,
              VoxelType type)
      : files_(std::move(files)), frames_(std::move(frames)), geometry_(geometry), type_(type) {}
  const VolumeGeometry& geometry() const override { return geometry_; }
  VoxelType voxel_type() const override { return type_; }
  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    const std::size_t plane = static_cast<std::size_t>(geometry_.voxels_per_plane()) * bytes_per_voxel(type_);
    std::vector<std::byte> stored;
    for (std::int64_t z = z_begin; z < z_end; ++z, out += plane) {
      const Frame& frame = frames_[static_cast<std::size_t>(z)];
      const DicomFile& file = files_[frame.file];
      stored.resize(static_cast<std::size_t>(file.frame_bytes()));
      std::ifstream in(file.path, std::ios::binary);
      in.seekg(static_cast<std::streamoff>(file.voxel_offset +
                                           static_cast<std::uint64_t>(frame.frame) * file.frame_bytes()));
      if (!in.read(reinterpret_cast<char*>(stored.data()), static_cast<std::streamsize>(stored.size())))
        throw Problem(ExitStatus::io_error,
                      file.path.string() + ", slice " + std::to_string(z) +
                          ": cannot be read; was the file changed since it was opened?");
      to_grey(stored.data(), file, type_, out);
    }
  }

 private:
  std::vector<DicomFile> files_;
  std::vector<Frame> frames_;
  VolumeGeometry geometry_;
  VoxelType type_;
};

std::unique_ptr<VolumeSource> decompressed(const std::vector<DicomFile>& files,
                                           const std::vector<Frame>& frames, const VolumeGeometry& geometry,
                                           VoxelType type) {
  const std::size_t plane = static_cast<std::size_t>(geometry.voxels_per_plane()) * bytes_per_voxel(type);
  auto volume = std::make_unique<MemoryVolume>(geometry, type);
  std::vector<std::byte> of_file;
  for (std::size_t i = 0; i < files.size(); ++i) {
    of_file.resize(plane * static_cast<std::size_t>(files[i].frames));
    decompress(files[i], type, of_file.data());
    for (std::size_t z = 0; z < frames.size(); ++z) {
      if (frames[z].file == i)
        std::memcpy(volume->data() + z * plane,
                    of_file.data() + static_cast<std::size_t>(frames[z].frame) * plane, plane);
    }
  }
  return volume;
}

// Files with the mark DICM; others are passed over unless their names say that they are slices.
std::vector<DicomFile> files_of(const fs::path& folder) {
  std::vector<fs::path> paths;
  for (const auto& entry : fs::directory_iterator(folder)) {
    const fs::path& file = entry.path();
    if (!entry.is_regular_file() || file.filename().string().front() == '.' || file.filename() == "DICOMDIR")
      continue;
    std::string ending = file.extension().string();
    for (char& c : ending) c = static_cast<char>(std::tolower(static_cast<unsigned char>(c)));
    if (is_dicom_file(file)) {
      paths.push_back(file);
    } else if (ending == ".dcm") {
      refuse_file(file, "is named as a DICOM file and is none; it is empty, truncated or damaged");
    }
  }
  std::sort(paths.begin(), paths.end());
  std::vector<DicomFile> out;
  for (const fs::path& path : paths) {
    out.push_back(read_dicom_header(path));
    const DicomFile& f = out.back();
    const std::uint64_t bytes = f.frame_bytes() * static_cast<std::uint64_t>(f.frames);
    if (f.compressed && bytes / largest_expansion > f.voxel_bytes)
      refuse_file(path, "promises more voxels than the file can hold; it is truncated or damaged");
  }
  return out;
}

void check_series(const std::vector<DicomFile>& files, const fs::path& folder) {
  if (files.empty()) refuse_file(folder, "holds no readable DICOM series");
  std::set<std::string> series;
  for (const DicomFile& f : files) series.insert(f.series);
  if (series.size() > 1)
    refuse_file(folder, "holds " + std::to_string(series.size()) +
                            " DICOM series; put the one to inspect into a folder of its own");
  if (files.size() == 1 && files.front().frames < 2)
    refuse_file(folder, "holds one DICOM slice only; a volume needs at least two");
  check_agreement(files);
}

}  // namespace

OpenedVolume open_dicom(const fs::path& folder) {
  OpenedVolume out;
  out.format = "DICOM";
  std::vector<DicomFile> files = files_of(folder);
  check_series(files, folder);
  const bool placed = std::all_of(files.begin(), files.end(), [](const DicomFile& f) {
    return static_cast<std::int64_t>(f.positions_mm.size()) == f.frames;
  });
  if (!placed) order_by_number(files, folder);
  std::vector<Frame> frames = frames_of(files);
  const DicomFile first = files.front();
  const Vec3 normal = normal_of(first);
  VolumeGeometry geometry;
  geometry.size = {first.columns, first.rows, static_cast<std::int64_t>(frames.size())};
  geometry.spacing_mm = {
      first.spacing_mm[0], first.spacing_mm[1],
      placed ? order_by_position(frames, normal, folder) : first.slice_spacing_mm.value_or(1)};
  if (placed) geometry.origin_mm = frames.front().position_mm;
  if (!placed && !first.positions_mm.empty()) geometry.origin_mm = first.positions_mm.front();
  for (std::size_t row = 0; row < 3; ++row) {
    geometry.direction[3 * row] = first.row_direction[row];
    geometry.direction[3 * row + 1] = first.column_direction[row];
    geometry.direction[3 * row + 2] = normal[row];
  }
  check_geometry(geometry, folder);
  const VoxelType type = voxel_type(files);
  checked_byte_count(geometry, type, folder);
  out.has_voxel_size = first.has_spacing && (placed || first.slice_spacing_mm);
  out.scan = first.scan;
  for (const Frame& f : frames) {
    if (out.data_files.empty() || out.data_files.back() != files[f.file].path)
      out.data_files.push_back(files[f.file].path);
  }
  const bool compressed =
      std::any_of(files.begin(), files.end(), [](const DicomFile& f) { return f.compressed; });
  if (compressed) {
    out.source = decompressed(files, frames, geometry, type);
  } else {
    out.source = std::make_unique<DicomVolume>(std::move(files), std::move(frames), geometry, type);
  }
  return out;
}

}  // namespace halfmark
