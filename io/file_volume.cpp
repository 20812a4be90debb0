#include "io/file_volume.h"

#include <fcntl.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <unistd.h>
#include <zlib.h>

#include <algorithm>
#include <bit>
#include <cmath>
#include <cstring>
#include <fstream>
#include <limits>

#include "io/memory_volume.h"
#include "io/problem.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

// What a gzip stream can expand to at most, by deflate's own limits.
constexpr std::uint64_t largest_expansion = 1040;

void swap_bytes(std::byte* bytes, std::size_t count, std::size_t width) {
  for (std::size_t i = 0; i < count; ++i) std::reverse(bytes + i * width, bytes + (i + 1) * width);
}

class MappedVolume : public VolumeSource {
 public:
  MappedVolume(const fs::path& file, std::uint64_t offset, const VolumeGeometry& geometry, VoxelType type,
               bool swapped)
      : geometry_(geometry),
        type_(type),
        swapped_(swapped),
        offset_(offset),
        bytes_(offset + checked_byte_count(geometry, type, file)) {
    const int handle = ::open(file.c_str(), O_RDONLY | O_CLOEXEC);
    if (handle < 0)
      throw Problem(ExitStatus::input_missing,
                    file.string() + ": cannot be opened for reading: " + std::strerror(errno));
    map_ = ::mmap(nullptr, bytes_, PROT_READ, MAP_PRIVATE, handle, 0);
    const int error = errno;
    ::close(handle);
    if (map_ == MAP_FAILED)
      throw Problem(ExitStatus::io_error,
                    file.string() + ": cannot be mapped into memory: " + std::strerror(error));
  }
  MappedVolume(const MappedVolume&) = delete;
  MappedVolume& operator=(const MappedVolume&) = delete;
  ~MappedVolume() override { ::munmap(map_, bytes_); }

  const VolumeGeometry& geometry() const override { return geometry_; }
  VoxelType voxel_type() const override { return type_; }
  const std::byte* resident() const override {
    const bool aligned = offset_ % bytes_per_voxel(type_) == 0;
    return swapped_ || !aligned ? nullptr : voxels();
  }
  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    const std::size_t plane = static_cast<std::size_t>(geometry_.voxels_per_plane()),
                      width = bytes_per_voxel(type_);
    const std::size_t count = plane * static_cast<std::size_t>(z_end - z_begin);
    std::memcpy(out, voxels() + plane * width * static_cast<std::size_t>(z_begin), count * width);
    if (swapped_) swap_bytes(out, count, width);
  }

 private:
  const std::byte* voxels() const { return static_cast<const std::byte*>(map_) + offset_; }
  VolumeGeometry geometry_;
  VoxelType type_;
  bool swapped_;
  std::uint64_t offset_, bytes_;
  void* map_ = nullptr;
};

bool is_swapped(VoxelType type, bool big_endian) {
  return bytes_per_voxel(type) > 1 && big_endian != (std::endian::native == std::endian::big);
}

struct Inflater {
  z_stream stream{};
  Inflater() { inflateInit2(&stream, 15 + 32); }  // zlib or gzip, told by its header
  ~Inflater() { inflateEnd(&stream); }
  Inflater(const Inflater&) = delete;
  Inflater& operator=(const Inflater&) = delete;
};

}  // namespace

void refuse_file(const fs::path& file, const std::string& sentence) {
  throw Problem(ExitStatus::bad_data, file.string() + ": " + sentence);
}

std::uint64_t checked_byte_count(const VolumeGeometry& geometry, VoxelType type, const fs::path& file) {
  std::uint64_t bytes = bytes_per_voxel(type);
  for (const std::int64_t n : geometry.size) {
    if (n <= 0) refuse_file(file, "a size of " + std::to_string(n) + " voxels; sizes must be at least 1");
    if (n > std::numeric_limits<std::int32_t>::max() - 64)
      refuse_file(
          file, "a size of " + std::to_string(n) + " voxels along one axis is more than this program takes");
    std::uint64_t next = 0;
    if (__builtin_mul_overflow(bytes, static_cast<std::uint64_t>(n), &next) ||
        next > (std::uint64_t{1} << 48)) {
      refuse_file(file, "the sizes multiply to more bytes than any file holds; the header is damaged");
    }
    bytes = next;
  }
  if (geometry.size[2] < 2)
    refuse_file(file,
                "holds one slice only; a volume needs at least two (give the folder of slices, or one file "
                "with all pages)");
  return bytes;
}

void check_geometry(const VolumeGeometry& geometry, const fs::path& file) {
  for (const double s : geometry.spacing_mm) {
    if (!std::isfinite(s) || s <= 0)
      refuse_file(file,
                  "the voxel size must be finite and above 0 along every axis; give it with --voxel-size");
  }
  for (const double o : geometry.origin_mm) {
    if (!std::isfinite(o)) refuse_file(file, "the origin is not finite; the header is damaged");
  }
  const auto& d = geometry.direction;
  for (std::size_t a = 0; a < 3; ++a) {
    for (std::size_t b = a; b < 3; ++b) {
      const double product = d[a] * d[b] + d[3 + a] * d[3 + b] + d[6 + a] * d[6 + b];
      if (!(std::abs(product - (a == b ? 1 : 0)) < 1e-3))
        refuse_file(file,
                    "the axes' directions are not at right angles and of length 1; resample the volume on a "
                    "straight grid");
    }
  }
}

std::unique_ptr<VolumeSource> map_volume(const fs::path& file, std::uint64_t offset,
                                         const VolumeGeometry& geometry, VoxelType type, bool big_endian) {
  check_geometry(geometry, file);
  const std::uint64_t wanted = checked_byte_count(geometry, type, file);
  std::error_code error;
  const std::uintmax_t size = fs::file_size(file, error);
  if (error) throw Problem(ExitStatus::input_missing, file.string() + ": cannot be read: " + error.message());
  if (size < offset || size - offset < wanted) {
    refuse_file(file, "the header promises " + std::to_string(wanted) + " bytes of voxels, the file holds " +
                          std::to_string(size < offset ? 0 : size - offset) +
                          "; it is truncated or the sizes are wrong");
  }
  return std::make_unique<MappedVolume>(file, offset, geometry, type, is_swapped(type, big_endian));
}

std::unique_ptr<VolumeSource> inflate_volume(const fs::path& file, std::uint64_t offset,
                                             const VolumeGeometry& geometry, VoxelType type, bool big_endian,
                                             std::uint64_t skip_bytes) {
  check_geometry(geometry, file);
  const std::uint64_t wanted = checked_byte_count(geometry, type, file);
  std::error_code error;
  const std::uintmax_t size = fs::file_size(file, error);
  if (error) throw Problem(ExitStatus::input_missing, file.string() + ": cannot be read: " + error.message());
  if (size <= offset || wanted / largest_expansion > size - offset) {
    refuse_file(file, "the header promises " + std::to_string(wanted) +
                          " bytes of voxels, far more than the compressed " +
                          std::to_string(size <= offset ? 0 : size - offset) + " bytes can hold");
  }
  std::ifstream in(file, std::ios::binary);
  in.seekg(static_cast<std::streamoff>(offset));
  auto volume = std::make_unique<MemoryVolume>(geometry, type);
  Inflater inflater;
  std::vector<char> chunk(1 << 18);
  std::vector<Bytef> skipped(1 << 16);
  std::uint64_t done = 0, to_skip = skip_bytes;
  int state = Z_OK;
  while (done < wanted && state != Z_STREAM_END) {
    in.read(chunk.data(), static_cast<std::streamsize>(chunk.size()));
    if (in.gcount() == 0) break;
    inflater.stream.next_in = reinterpret_cast<Bytef*>(chunk.data());
    inflater.stream.avail_in = static_cast<uInt>(in.gcount());
    while (inflater.stream.avail_in > 0 && done < wanted && state != Z_STREAM_END) {
      const bool skipping = to_skip > 0;
      const std::uint64_t room = skipping ? std::min<std::uint64_t>(to_skip, skipped.size())
                                          : std::min<std::uint64_t>(wanted - done, 1u << 30);
      inflater.stream.next_out = skipping ? skipped.data() : reinterpret_cast<Bytef*>(volume->data() + done);
      inflater.stream.avail_out = static_cast<uInt>(room);
      state = inflate(&inflater.stream, Z_NO_FLUSH);
      if (state != Z_OK && state != Z_STREAM_END && state != Z_BUF_ERROR)
        refuse_file(file, "the compressed voxels are damaged; export the volume again");
      const std::uint64_t got = room - inflater.stream.avail_out;
      (skipping ? to_skip : done) += skipping ? std::uint64_t{0} - got : got;
      if (state == Z_BUF_ERROR && got == 0) break;
    }
  }
  if (done < wanted)
    refuse_file(file, "the header promises " + std::to_string(wanted) +
                          " bytes of voxels, the compressed data hold " + std::to_string(done) +
                          "; it is truncated");
  if (is_swapped(type, big_endian))
    swap_bytes(volume->data(), static_cast<std::size_t>(geometry.voxel_count()), bytes_per_voxel(type));
  return volume;
}

fs::path data_file_beside(const fs::path& header, const std::string& name) {
  const fs::path relative(name);
  const fs::path folder =
      fs::weakly_canonical(header.parent_path().empty() ? fs::path(".") : header.parent_path());
  const fs::path target = fs::weakly_canonical(folder / relative);
  const auto mismatch = std::mismatch(folder.begin(), folder.end(), target.begin(), target.end());
  if (relative.empty() || relative.is_absolute() || mismatch.first != folder.end()) {
    refuse_file(header, "names the data file '" + name +
                            "', which does not lie in the header's folder or below; move it there");
  }
  if (!fs::is_regular_file(target))
    throw Problem(ExitStatus::input_missing,
                  header.string() + ": the data file '" + name + "' does not exist");
  return header.parent_path() / relative;
}

std::string file_head(const fs::path& file, std::size_t count) {
  std::ifstream in(file, std::ios::binary);
  if (!in) throw Problem(ExitStatus::input_missing, file.string() + ": cannot be opened for reading");
  std::string head(count, '\0');
  in.read(head.data(), static_cast<std::streamsize>(count));
  head.resize(static_cast<std::size_t>(in.gcount()));
  if (head.empty()) refuse_file(file, "is empty");
  return head;
}

}  // namespace halfmark
