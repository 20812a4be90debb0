// TIFF: one file with a page a slice, or a folder of numbered files; read page by page through libtiff.
#include <tiffio.h>

#include <algorithm>
#include <cstdarg>
#include <cstdio>
#include <cstring>
#include <fstream>
#include <memory>
#include <mutex>

#include "io/file_volume.h"
#include "io/volume_formats.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

// Packed pictures grow by no more than this (deflate by 1032, LZW by about 2700, others by somewhat more);
// what promises more is damaged, and is refused before memory is asked for.
constexpr std::uint64_t largest_expansion = 1 << 16;

struct Close {
  void operator()(TIFF* file) const { TIFFClose(file); }
};
using Handle = std::unique_ptr<TIFF, Close>;

thread_local std::string last_message;  // libtiff reports errors through a callback

void keep_message(const char* module, const char* format, va_list arguments) {
  char text[400];
  std::vsnprintf(text, sizeof text, format, arguments);
  last_message = std::string(module != nullptr ? module : "") + ": " + text;
}

Handle open_handle(const fs::path& file) {
  static std::once_flag once;
  std::call_once(once, [] {
    TIFFSetErrorHandler(keep_message);
    TIFFSetWarningHandler(nullptr);
  });
  if (!fs::exists(file)) throw Problem(ExitStatus::input_missing, file.string() + ": does not exist");
  if (fs::file_size(file) == 0) refuse_file(file, "is empty");
  Handle handle(TIFFOpen(file.c_str(), "rm"));
  if (!handle) refuse_file(file, "is not a readable TIFF; it is truncated or damaged");
  return handle;
}

struct Page {
  std::uint32_t width = 0, height = 0;
  VoxelType type = VoxelType::u8;
  bool operator==(const Page&) const = default;
};

Page page_of(TIFF* tiff, const fs::path& file) {
  Page page;
  std::uint16_t bits = 1, samples = 1, format = SAMPLEFORMAT_UINT, photometric = PHOTOMETRIC_MINISBLACK;
  TIFFGetField(tiff, TIFFTAG_IMAGEWIDTH, &page.width);
  TIFFGetField(tiff, TIFFTAG_IMAGELENGTH, &page.height);
  TIFFGetFieldDefaulted(tiff, TIFFTAG_BITSPERSAMPLE, &bits);
  TIFFGetFieldDefaulted(tiff, TIFFTAG_SAMPLESPERPIXEL, &samples);
  TIFFGetFieldDefaulted(tiff, TIFFTAG_SAMPLEFORMAT, &format);
  TIFFGetField(tiff, TIFFTAG_PHOTOMETRIC, &photometric);
  if (samples != 1 || photometric == PHOTOMETRIC_PALETTE)
    refuse_file(file, "holds colour pictures; export grey values");
  if (bits == 8 && format == SAMPLEFORMAT_UINT) {
    page.type = VoxelType::u8;
  } else if (bits == 8 && format == SAMPLEFORMAT_INT) {
    page.type = VoxelType::i8;
  } else if (bits == 16 && format == SAMPLEFORMAT_UINT) {
    page.type = VoxelType::u16;
  } else if (bits == 16 && format == SAMPLEFORMAT_INT) {
    page.type = VoxelType::i16;
  } else if (bits == 32 && format == SAMPLEFORMAT_IEEEFP) {
    page.type = VoxelType::f32;
  } else {
    refuse_file(file, "voxels of " + std::to_string(bits) +
                          " bits in this form are not read; export 8- or 16-bit integers or 32-bit floats");
  }
  if (page.width == 0 || page.height == 0 || page.width > (1u << 20) || page.height > (1u << 20))
    refuse_file(file, "its picture size is not plausible; the file is damaged");
  return page;
}

// Strips must lie within the file: a truncated one is told at once, not in the middle of an inspection.
void check_strips(TIFF* tiff, const Page& picture, std::uintmax_t file_size, const fs::path& file,
                  std::int64_t page) {
  const std::uint32_t strips = TIFFIsTiled(tiff) != 0 ? TIFFNumberOfTiles(tiff) : TIFFNumberOfStrips(tiff);
  std::uint64_t held = 0;
  for (std::uint32_t s = 0; s < strips; ++s) {
    const std::uint64_t offset = TIFFGetStrileOffset(tiff, s), count = TIFFGetStrileByteCount(tiff, s);
    if (offset == 0 || count == 0 || offset > file_size || count > file_size - offset) {
      refuse_file(
          file, "page " + std::to_string(page) + " promises more data than the file holds; it is truncated");
    }
    held += count;
  }
  std::uint16_t compression = COMPRESSION_NONE;
  TIFFGetFieldDefaulted(tiff, TIFFTAG_COMPRESSION, &compression);
  const std::uint64_t voxels = std::uint64_t{picture.width} * picture.height * bytes_per_voxel(picture.type);
  if (voxels / (compression == COMPRESSION_NONE ? 1 : largest_expansion) > held)
    refuse_file(file, "page " + std::to_string(page) + " promises a picture of " +
                          std::to_string(picture.width) + " x " + std::to_string(picture.height) +
                          ", far more than its data can hold");
}

// libtiff takes a directory whose link to the next one is cut off for the last one: the file's own end tells.
void check_directory(TIFF* tiff, std::uintmax_t file_size, const fs::path& file, std::int64_t page) {
  const std::string head = file_head(file, 4);
  const bool big_endian = head[0] == 'M', big_tiff = (big_endian ? head[3] : head[2]) == 43;
  const std::uint64_t offset = TIFFCurrentDirOffset(tiff);
  std::ifstream in(file, std::ios::binary);
  in.seekg(static_cast<std::streamoff>(offset));
  std::uint64_t entries = 0;
  const int bytes = big_tiff ? 8 : 2;
  for (int i = 0; i < bytes; ++i) {
    const auto byte = static_cast<std::uint64_t>(static_cast<unsigned char>(in.get()));
    entries = big_endian ? (entries << 8) | byte : entries | (byte << (8 * i));
  }
  const std::uint64_t length = big_tiff ? 16 + 20 * entries : 6 + 12 * entries;
  if (!in || entries > 65536 || offset > file_size || length > file_size - offset) {
    refuse_file(file, "page " + std::to_string(page) + ": its directory is cut off; the file is truncated");
  }
}

void read_tiles(TIFF* tiff, const Page& page, std::byte* out, const std::string& place) {
  std::uint32_t tile_width = 0, tile_height = 0;
  TIFFGetField(tiff, TIFFTAG_TILEWIDTH, &tile_width);
  TIFFGetField(tiff, TIFFTAG_TILELENGTH, &tile_height);
  const std::size_t width = bytes_per_voxel(page.type);
  const tmsize_t bytes = TIFFTileSize(tiff);
  if (tile_width == 0 || tile_height == 0 ||
      bytes < static_cast<tmsize_t>(std::uint64_t{tile_width} * tile_height * width) || bytes > (1 << 30)) {
    throw Problem(ExitStatus::bad_data, place + ": its tiles are not plausible; the file is damaged");
  }
  std::vector<std::byte> tile(static_cast<std::size_t>(bytes));
  for (std::uint32_t y = 0; y < page.height; y += tile_height) {
    for (std::uint32_t x = 0; x < page.width; x += tile_width) {
      if (TIFFReadTile(tiff, tile.data(), x, y, 0, 0) < 0)
        throw Problem(ExitStatus::bad_data, place + ": cannot be read: " + last_message);
      for (std::uint32_t r = 0; r < std::min(tile_height, page.height - y); ++r) {
        std::memcpy(out + (std::size_t{y + r} * page.width + x) * width,
                    tile.data() + std::size_t{r} * tile_width * width,
                    std::min(tile_width, page.width - x) * width);
      }
    }
  }
}

void read_strips(TIFF* tiff, const Page& page, std::byte* out, const std::string& place) {
  const std::size_t row = std::size_t{page.width} * bytes_per_voxel(page.type);
  if (static_cast<std::size_t>(TIFFScanlineSize(tiff)) != row)
    throw Problem(ExitStatus::bad_data,
                  place + ": its rows are not as long as its width; the file is damaged");
  std::uint32_t rows_per_strip = page.height;
  TIFFGetFieldDefaulted(tiff, TIFFTAG_ROWSPERSTRIP, &rows_per_strip);
  rows_per_strip = std::min(std::max<std::uint32_t>(rows_per_strip, 1), page.height);
  const std::uint32_t strips = TIFFNumberOfStrips(tiff);
  for (std::uint32_t s = 0; s < strips; ++s) {
    const std::uint64_t first = std::uint64_t{s} * rows_per_strip;
    if (first >= page.height) break;
    const auto bytes =
        static_cast<tmsize_t>(std::min<std::uint64_t>(rows_per_strip, page.height - first) * row);
    if (TIFFReadEncodedStrip(tiff, s, out + first * row, bytes) != bytes)
      throw Problem(ExitStatus::bad_data, place + ": is truncated or damaged: " + last_message);
  }
}

void read_page(TIFF* tiff, const Page& page, std::byte* out, const std::string& place) {
  if (TIFFIsTiled(tiff) != 0) {
    read_tiles(tiff, page, out, place);
  } else {
    read_strips(tiff, page, out, place);
  }
}

// One slice per (file, directory offset).
struct Slice {
  fs::path file;
  std::uint64_t directory = 0;  // 0: the first
};

class TiffVolume : public VolumeSource {
 public:
  TiffVolume(std::vector<Slice> slices, const Page& page) : slices_(std::move(slices)), page_(page) {
    geometry_.size = {page.width, page.height, static_cast<std::int64_t>(slices_.size())};
    checked_byte_count(geometry_, page.type, slices_.front().file);
  }
  const VolumeGeometry& geometry() const override { return geometry_; }
  VoxelType voxel_type() const override { return page_.type; }
  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    const std::size_t plane =
        static_cast<std::size_t>(geometry_.voxels_per_plane()) * bytes_per_voxel(page_.type);
    Handle handle;
    fs::path opened;
    for (std::int64_t z = z_begin; z < z_end; ++z, out += plane) {
      const Slice& slice = slices_[static_cast<std::size_t>(z)];
      const std::string place = slice.file.string() + ", slice " + std::to_string(z);
      if (!handle || opened != slice.file) {
        handle = open_handle(slice.file);
        opened = slice.file;
      }
      if (slice.directory != 0 && TIFFSetSubDirectory(handle.get(), slice.directory) == 0)
        throw Problem(ExitStatus::bad_data, place + ": cannot be reached: " + last_message);
      if (!(page_of(handle.get(), slice.file) == page_))
        throw Problem(ExitStatus::bad_data, place + ": changed since it was opened");
      read_page(handle.get(), page_, out, place);
    }
  }

 private:
  std::vector<Slice> slices_;
  Page page_;
  VolumeGeometry geometry_;
};

}  // namespace

OpenedVolume open_tiff(const fs::path& file) {
  const Handle handle = open_handle(file);
  const std::uintmax_t size = fs::file_size(file);
  std::vector<Slice> slices;
  Page first;
  for (;;) {
    const Page page = page_of(handle.get(), file);
    const auto number = static_cast<std::int64_t>(slices.size());
    if (slices.empty()) first = page;
    if (!(page == first))
      refuse_file(file, "page " + std::to_string(number) +
                            " differs in size or voxel type from the first; all must agree");
    check_directory(handle.get(), size, file, number);
    check_strips(handle.get(), page, size, file, number);
    slices.push_back({file, TIFFCurrentDirOffset(handle.get())});
    last_message.clear();
    if (TIFFLastDirectory(handle.get()) != 0) break;
    if (TIFFReadDirectory(handle.get()) == 0)
      refuse_file(file,
                  "page " + std::to_string(number + 1) + " cannot be read; the file is truncated or damaged");
  }
  OpenedVolume out;
  out.format = "TIFF";
  out.source = std::make_unique<TiffVolume>(std::move(slices), first);
  out.data_files.push_back(file);
  return out;
}

OpenedVolume open_tiff_folder(const fs::path& folder, std::vector<fs::path> files) {
  OpenedVolume out;
  out.format = "TIFF slices";
  out.data_files = slices_by_number(folder, std::move(files));
  std::vector<Slice> slices;
  Page first;
  for (const fs::path& file : out.data_files) {
    const Handle handle = open_handle(file);
    const Page page = page_of(handle.get(), file);
    if (slices.empty()) first = page;
    if (!(page == first)) {
      refuse_file(file, "differs in size or voxel type from the first slice (" + std::to_string(page.width) +
                            " x " + std::to_string(page.height) + " against " + std::to_string(first.width) +
                            " x " + std::to_string(first.height) + "); all must agree");
    }
    check_strips(handle.get(), page, fs::file_size(file), file, 0);
    slices.push_back({file, 0});
  }
  out.source = std::make_unique<TiffVolume>(std::move(slices), first);
  return out;
}

}  // namespace halfmark
