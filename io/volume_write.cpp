// Volumes out, plane by plane.
#include <tiffio.h>
#include <zlib.h>

#include <algorithm>
#include <cctype>
#include <cerrno>
#include <cstdio>
#include <cstring>
#include <functional>
#include <memory>
#include <sstream>

#include "io/file_volume.h"
#include "io/output_file.h"
#include "io/volume_open.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

constexpr std::int64_t planes_at_once = 8;
// Voxels start at a multiple of this, so that a mapped file is read in aligned steps.
constexpr std::size_t data_alignment = 4096;

std::string number(double value) {
  char text[40];
  std::snprintf(text, sizeof text, "%.17g", value);
  // The shortest text that reads back the same.
  for (int digits = 1; digits < 17; ++digits) {
    char shorter[40];
    std::snprintf(shorter, sizeof shorter, "%.*g", digits, value);
    if (std::strtod(shorter, nullptr) == value) return shorter;
  }
  return text;
}

std::string three(const Vec3& v) { return number(v[0]) + " " + number(v[1]) + " " + number(v[2]); }

const char* const meta_names[] = {"MET_UCHAR", "MET_CHAR", "MET_USHORT", "MET_SHORT", "MET_FLOAT"};
const char* const nrrd_names[] = {"uint8", "int8", "uint16", "int16", "float"};
const char* const raw_names[] = {"u8", "i8", "u16", "i16", "f32"};
const char* const vtk_names[] = {"UInt8", "Int8", "UInt16", "Int16", "Float32"};

class Writer {
 public:
  explicit Writer(const fs::path& file, const fs::path& shown)
      : shown_(shown), file_(std::fopen(file.c_str(), "wbx")) {
    if (file_ == nullptr)
      throw Problem(ExitStatus::cannot_create,
                    shown.string() + ": cannot create the file: " + std::strerror(errno));
  }
  Writer(const Writer&) = delete;
  Writer& operator=(const Writer&) = delete;
  ~Writer() {
    if (file_ != nullptr) std::fclose(file_);
  }
  void write(const void* bytes, std::size_t count) {
    if (count > 0 && std::fwrite(bytes, 1, count, file_) != count) fail();
  }
  void write(const std::string& text) { write(text.data(), text.size()); }
  void close() {
    const int result = std::fclose(file_);
    file_ = nullptr;
    if (result != 0) fail();
  }

 private:
  [[noreturn]] void fail() const {
    throw Problem(ExitStatus::io_error, shown_.string() + ": cannot write: " + std::strerror(errno) +
                                            "; free some space or choose another folder");
  }
  fs::path shown_;
  std::FILE* file_;
};

// Calls put(bytes, count) for the voxels of all planes in order.
void for_planes(const VolumeSource& source, const RunControl& control,
                const std::function<void(const std::byte*, std::size_t)>& put) {
  const VolumeGeometry& g = source.geometry();
  const std::size_t plane =
      static_cast<std::size_t>(g.voxels_per_plane()) * bytes_per_voxel(source.voxel_type());
  std::vector<std::byte> buffer(plane * static_cast<std::size_t>(std::min(planes_at_once, g.size[2])));
  for (std::int64_t z = 0; z < g.size[2]; z += planes_at_once) {
    control.step("write", static_cast<double>(z) / static_cast<double>(g.size[2]));
    const std::int64_t end = std::min(z + planes_at_once, g.size[2]);
    source.read_planes(z, end, buffer.data());
    put(buffer.data(), plane * static_cast<std::size_t>(end - z));
  }
}

// Lines of comment that fill so many bytes or, where they are too few for one, a block of the alignment more.
// Other readers of the format take short lines only.
std::string comment_lines(std::size_t bytes) {
  constexpr std::size_t line = 80;
  const std::string comment = "Comment = ";
  const std::size_t least = comment.size() + 2;
  if (bytes < least) bytes += data_alignment;
  std::string out;
  while (bytes > 0) {
    const std::size_t now = bytes < line + least ? bytes : line;
    out += comment + std::string(now - comment.size() - 1, '.') + "\n";
    bytes -= now;
  }
  return out;
}

std::string meta_header(const VolumeSource& source, const std::string& data_file) {
  const VolumeGeometry& g = source.geometry();
  const auto& d = g.direction;
  std::ostringstream out;
  out << "ObjectType = Image\nNDims = 3\nBinaryData = True\nBinaryDataByteOrderMSB = False\nCompressedData = "
         "False\nTransformMatrix =";
  for (std::size_t axis = 0; axis < 3; ++axis) {
    for (std::size_t row = 0; row < 3; ++row) out << ' ' << number(d[3 * row + axis]);
  }
  out << "\nOffset = " << three(g.origin_mm)
      << "\nCenterOfRotation = 0 0 0\nElementSpacing = " << three(g.spacing_mm) << "\nDimSize = " << g.size[0]
      << ' ' << g.size[1] << ' ' << g.size[2] << "\n";
  const std::string end = std::string("ElementType = ") + meta_names[static_cast<int>(source.voxel_type())] +
                          "\nElementDataFile = " + data_file + "\n";
  if (data_file == "LOCAL") {
    out << comment_lines(data_alignment - (out.str().size() + end.size()) % data_alignment);
  }
  out << end;
  return out.str();
}

std::string nrrd_header(const VolumeSource& source, const std::string& data_file) {
  const VolumeGeometry& g = source.geometry();
  std::ostringstream out;
  out << "NRRD0004\ntype: " << nrrd_names[static_cast<int>(source.voxel_type())]
      << "\ndimension: 3\nspace: left-posterior-superior\nsizes: " << g.size[0] << ' ' << g.size[1] << ' '
      << g.size[2] << "\nspace directions:";
  for (std::size_t axis = 0; axis < 3; ++axis) {
    out << " (";
    for (std::size_t row = 0; row < 3; ++row)
      out << (row > 0 ? "," : "") << number(g.direction[3 * row + axis] * g.spacing_mm[axis]);
    out << ')';
  }
  out << "\nkinds: domain domain domain\nendian: little\nencoding: raw\nspace origin: ("
      << number(g.origin_mm[0]) << ',' << number(g.origin_mm[1]) << ',' << number(g.origin_mm[2]) << ")\n";
  if (!data_file.empty()) out << "data file: " << data_file << "\n";
  out << "\n";
  return out.str();
}

std::string raw_sidecar(const VolumeSource& source) {
  const VolumeGeometry& g = source.geometry();
  std::ostringstream out;
  out << "{\n  \"size\": [" << g.size[0] << ", " << g.size[1] << ", " << g.size[2]
      << "],\n  \"voxel_type\": \"" << raw_names[static_cast<int>(source.voxel_type())]
      << "\",\n  \"voxel_size_mm\": [" << number(g.spacing_mm[0]) << ", " << number(g.spacing_mm[1]) << ", "
      << number(g.spacing_mm[2]) << "],\n  \"origin_mm\": [" << number(g.origin_mm[0]) << ", "
      << number(g.origin_mm[1]) << ", " << number(g.origin_mm[2]) << "],\n  \"direction\": [";
  for (std::size_t i = 0; i < 9; ++i) out << (i > 0 ? ", " : "") << number(g.direction[i]);
  out << "],\n  \"byte_order\": \"little\",\n  \"header_bytes\": 0\n}\n";
  return out.str();
}

std::string vti_header(const VolumeSource& source) {
  const VolumeGeometry& g = source.geometry();
  std::ostringstream out, extent;
  extent << "0 " << g.size[0] - 1 << " 0 " << g.size[1] - 1 << " 0 " << g.size[2] - 1;
  out << "<?xml version=\"1.0\"?>\n<VTKFile type=\"ImageData\" version=\"1.0\" byte_order=\"LittleEndian\" "
         "header_type=\"UInt64\">\n<ImageData WholeExtent=\""
      << extent.str() << "\" Origin=\"" << three(g.origin_mm) << "\" Spacing=\"" << three(g.spacing_mm)
      << "\" Direction=\"";
  for (std::size_t i = 0; i < 9; ++i) out << (i > 0 ? " " : "") << number(g.direction[i]);
  out << "\">\n<Piece Extent=\"" << extent.str() << "\"><PointData Scalars=\"grey\"><DataArray type=\""
      << vtk_names[static_cast<int>(source.voxel_type())]
      << "\" Name=\"grey\" format=\"appended\" "
         "offset=\"0\"/></PointData></Piece>\n</ImageData>\n<AppendedData encoding=\"raw\">\n_";
  return out.str();
}

// NIfTI-1 header of 352 bytes, affine form; x and y turned to its own orientation.
std::string nifti_header(const VolumeSource& source, const fs::path& file) {
  const VolumeGeometry& g = source.geometry();
  std::string head(352, '\0');
  const auto put = [&](std::size_t offset, auto value) {
    std::memcpy(head.data() + offset, &value, sizeof value);
  };
  put(0, std::int32_t{348});
  put(40, std::int16_t{3});
  static const std::int16_t types[] = {2, 256, 512, 4, 16};
  for (std::size_t a = 0; a < 3; ++a) {
    if (g.size[a] > 32767)
      throw Problem(
          ExitStatus::usage,
          file.string() + ": NIfTI holds at most 32767 voxels along an axis; choose another format");
    put(42 + 2 * a, static_cast<std::int16_t>(g.size[a]));
    put(80 + 4 * a, static_cast<float>(g.spacing_mm[a]));
  }
  for (std::size_t a = 3; a < 7; ++a) put(42 + 2 * a, std::int16_t{1});
  put(70, types[static_cast<int>(source.voxel_type())]);
  put(72, static_cast<std::int16_t>(8 * bytes_per_voxel(source.voxel_type())));
  put(76, 1.0f);
  put(108, 352.0f);
  put(112, 1.0f);
  head[123] = 2;  // mm
  put(254, std::int16_t{1});
  for (std::size_t row = 0; row < 3; ++row) {
    const double flip = row < 2 ? -1 : 1;
    for (std::size_t axis = 0; axis < 3; ++axis)
      put(280 + 16 * row + 4 * axis,
          static_cast<float>(flip * g.direction[3 * row + axis] * g.spacing_mm[axis]));
    put(280 + 16 * row + 12, static_cast<float>(flip * g.origin_mm[row]));
  }
  std::memcpy(head.data() + 344, "n+1", 4);
  return head;
}

void write_plain(const VolumeSource& source, const std::string& header, const fs::path& temporary,
                 const fs::path& shown, const RunControl& control) {
  Writer out(temporary, shown);
  out.write(header);
  for_planes(source, control, [&](const std::byte* bytes, std::size_t count) { out.write(bytes, count); });
  out.close();
}

void write_gzip(const VolumeSource& source, const std::string& header, const fs::path& temporary,
                const fs::path& shown, const RunControl& control) {
  gzFile out = gzopen(temporary.c_str(), "wb6");
  if (out == nullptr)
    throw Problem(ExitStatus::cannot_create,
                  shown.string() + ": cannot create the file: " + std::strerror(errno));
  const std::unique_ptr<gzFile_s, int (*)(gzFile)> closer(out, gzclose);
  bool sound = gzwrite(out, header.data(), static_cast<unsigned>(header.size())) > 0;
  for_planes(source, control, [&](const std::byte* bytes, std::size_t count) {
    for (std::size_t at = 0; sound && at < count;) {
      const auto part = static_cast<unsigned>(std::min<std::size_t>(count - at, 1u << 28));
      sound = gzwrite(out, bytes + at, part) == static_cast<int>(part);
      at += part;
    }
  });
  if (!sound || gzflush(out, Z_FINISH) != Z_OK)
    throw Problem(ExitStatus::io_error,
                  shown.string() + ": cannot write; free some space or choose another folder");
}

void write_tiff(const VolumeSource& source, const fs::path& temporary, const fs::path& shown,
                const RunControl& control) {
  const VolumeGeometry& g = source.geometry();
  const std::size_t width = bytes_per_voxel(source.voxel_type()),
                    plane = static_cast<std::size_t>(g.voxels_per_plane()) * width;
  const bool big = plane * static_cast<std::size_t>(g.size[2]) > (std::size_t{2} << 30);
  TIFFSetErrorHandler(nullptr);
  const std::unique_ptr<TIFF, void (*)(TIFF*)> out(TIFFOpen(temporary.c_str(), big ? "w8" : "w"), TIFFClose);
  if (!out)
    throw Problem(ExitStatus::cannot_create,
                  shown.string() + ": cannot create the file: " + std::strerror(errno));
  const VoxelType type = source.voxel_type();
  const int format = type == VoxelType::f32                            ? SAMPLEFORMAT_IEEEFP
                     : type == VoxelType::i8 || type == VoxelType::i16 ? SAMPLEFORMAT_INT
                                                                       : SAMPLEFORMAT_UINT;
  for_planes(source, control, [&](const std::byte* bytes, std::size_t count) {
    for (std::size_t at = 0; at < count; at += plane) {
      TIFFSetField(out.get(), TIFFTAG_IMAGEWIDTH, static_cast<std::uint32_t>(g.size[0]));
      TIFFSetField(out.get(), TIFFTAG_IMAGELENGTH, static_cast<std::uint32_t>(g.size[1]));
      TIFFSetField(out.get(), TIFFTAG_BITSPERSAMPLE, static_cast<int>(8 * width));
      TIFFSetField(out.get(), TIFFTAG_SAMPLESPERPIXEL, 1);
      TIFFSetField(out.get(), TIFFTAG_SAMPLEFORMAT, format);
      TIFFSetField(out.get(), TIFFTAG_PHOTOMETRIC, PHOTOMETRIC_MINISBLACK);
      TIFFSetField(out.get(), TIFFTAG_ROWSPERSTRIP, static_cast<std::uint32_t>(g.size[1]));
      std::byte* data =
          const_cast<std::byte*>(bytes) + at;  // libtiff does not write to it without compression
      const bool sound = TIFFWriteEncodedStrip(out.get(), 0, data, static_cast<tmsize_t>(plane)) ==
                             static_cast<tmsize_t>(plane) &&
                         TIFFWriteDirectory(out.get()) != 0;
      if (!sound)
        throw Problem(ExitStatus::io_error,
                      shown.string() + ": cannot write; free some space or choose another folder");
    }
  });
}

}  // namespace

void write_volume(const VolumeSource& source, const fs::path& path, const RunControl& control) {
  std::string ending = path.extension().string();
  for (char& c : ending) c = static_cast<char>(std::tolower(static_cast<unsigned char>(c)));
  OutputSet set;
  const auto with_data = [&](const std::string& header, const fs::path& data) {
    set.write(path, header);
    write_plain(source, "", set.temporary_for(data), data, control);
  };
  // One data file a header: two headers of one name must not share it.
  const fs::path raw = path.string() + ".raw";
  if (ending == ".mha") {
    write_plain(source, meta_header(source, "LOCAL"), set.temporary_for(path), path, control);
  } else if (ending == ".mhd") {
    with_data(meta_header(source, raw.filename().string()), raw);
  } else if (ending == ".nrrd") {
    write_plain(source, nrrd_header(source, ""), set.temporary_for(path), path, control);
  } else if (ending == ".nhdr") {
    with_data(nrrd_header(source, raw.filename().string()), raw);
  } else if (ending == ".raw") {
    set.write(path.string() + ".json", raw_sidecar(source));
    write_plain(source, "", set.temporary_for(path), path, control);
  } else if (ending == ".vti") {
    const std::uint64_t bytes = checked_byte_count(source.geometry(), source.voxel_type(), path);
    const fs::path temporary = set.temporary_for(path);
    Writer out(temporary, path);
    out.write(vti_header(source));
    out.write(&bytes, sizeof bytes);
    for_planes(source, control, [&](const std::byte* data, std::size_t count) { out.write(data, count); });
    out.write("\n</AppendedData>\n</VTKFile>\n");
    out.close();
  } else if (ending == ".nii") {
    write_plain(source, nifti_header(source, path), set.temporary_for(path), path, control);
  } else if (ending == ".gz" && fs::path(path).replace_extension().extension() == ".nii") {
    write_gzip(source, nifti_header(source, path), set.temporary_for(path), path, control);
  } else if (ending == ".tif" || ending == ".tiff") {
    write_tiff(source, set.temporary_for(path), path, control);
  } else {
    throw Problem(
        ExitStatus::usage,
        path.string() +
            ": cannot write this format; endings: .mha .mhd .nrrd .nhdr .tif .raw .vti .nii .nii.gz");
  }
  set.commit();
}

}  // namespace halfmark
