// NIfTI-1 (.nii, .nii.gz): a binary header of 348 bytes.
#include <zlib.h>

#include <algorithm>
#include <array>
#include <bit>
#include <cmath>
#include <cstring>
#include <memory>
#include <type_traits>
#include <utility>
#include <vector>

#include "io/file_volume.h"
#include "io/volume_formats.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

constexpr std::size_t header_bytes = 348;

class Fields {
 public:
  Fields(const std::string& head, bool swapped) : head_(head), swapped_(swapped) {}
  template <class T>
  T at(std::size_t offset) const {
    std::array<char, sizeof(T)> bytes;
    std::memcpy(bytes.data(), head_.data() + offset, sizeof(T));
    if (swapped_) std::reverse(bytes.begin(), bytes.end());
    return std::bit_cast<T>(bytes);
  }

 private:
  const std::string& head_;
  bool swapped_;
};

std::string unpacked_head(const fs::path& file) {
  gzFile in = gzopen(file.c_str(), "rb");  // reads plain files too
  if (in == nullptr)
    throw Problem(ExitStatus::input_missing, file.string() + ": cannot be opened for reading");
  std::string head(header_bytes + 4, '\0');
  const int got = gzread(in, head.data(), static_cast<unsigned>(head.size()));
  gzclose(in);
  if (got < static_cast<int>(header_bytes)) refuse_file(file, "is too short for a NIfTI header");
  return head;
}

// Rotation of the quaternion form (NIfTI-1 method 2).
void from_quaternion(const Fields& f, VolumeGeometry& g) {
  double b = f.at<float>(256), c = f.at<float>(260), d = f.at<float>(264), a = 1 - b * b - c * c - d * d;
  if (a < 1e-7) {  // half a turn: b, c and d have unit length but for rounding (nifti1.h)
    const double norm = std::sqrt(b * b + c * c + d * d);
    b /= norm;
    c /= norm;
    d /= norm;
    a = 0;
  }
  a = std::sqrt(a);
  const double handed = f.at<float>(76) < 0 ? -1 : 1;
  g.direction = {
      a * a + b * b - c * c - d * d, 2 * (b * c - a * d),           handed * 2 * (b * d + a * c),
      2 * (b * c + a * d),           a * a + c * c - b * b - d * d, handed * 2 * (c * d - a * b),
      2 * (b * d - a * c),           2 * (c * d + a * b),           handed * (a * a + d * d - b * b - c * c)};
  g.origin_mm = {f.at<float>(268), f.at<float>(272), f.at<float>(276)};
}

// Affine form (NIfTI-1 method 3).
void from_affine(const Fields& f, VolumeGeometry& g) {
  for (std::size_t axis = 0; axis < 3; ++axis) {
    Vec3 v;
    for (std::size_t row = 0; row < 3; ++row) v[row] = f.at<float>(280 + 16 * row + 4 * axis);
    g.spacing_mm[axis] = length(v);
    for (std::size_t row = 0; row < 3; ++row) g.direction[3 * row + axis] = v[row] / length(v);
  }
  for (std::size_t row = 0; row < 3; ++row) g.origin_mm[row] = f.at<float>(280 + 16 * row + 12);
}

// Grey values that the header scales, as floats.
class ScaledVolume : public VolumeSource {
 public:
  ScaledVolume(std::unique_ptr<VolumeSource> stored, double slope, double intercept)
      : stored_(std::move(stored)), slope_(slope), intercept_(intercept) {}
  const VolumeGeometry& geometry() const override { return stored_->geometry(); }
  VoxelType voxel_type() const override { return VoxelType::f32; }
  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    const auto count = static_cast<std::size_t>(geometry().voxels_per_plane() * (z_end - z_begin));
    std::vector<std::byte> stored(count * bytes_per_voxel(stored_->voxel_type()));
    stored_->read_planes(z_begin, z_end, stored.data());
    visit_voxel_type(stored_->voxel_type(), [&](auto* t) {
      using T = std::remove_pointer_t<decltype(t)>;
      for (std::size_t i = 0; i < count; ++i) {
        T value;
        std::memcpy(&value, stored.data() + i * sizeof value, sizeof value);
        const auto grey = static_cast<float>(slope_ * static_cast<double>(value) + intercept_);
        std::memcpy(out + i * sizeof grey, &grey, sizeof grey);
      }
    });
  }

 private:
  std::unique_ptr<VolumeSource> stored_;
  double slope_, intercept_;
};

// Whether no corner of the volume lies further apart than a hundredth of a voxel or a thousandth of its
// distance.
bool is_same_place(const VolumeGeometry& a, const VolumeGeometry& b) {
  for (int corner = 0; corner < 8; ++corner) {
    Vec3 index;
    for (std::size_t i = 0; i < 3; ++i)
      index[i] = (corner >> i & 1) != 0 ? static_cast<double>(b.size[i]) : 0;
    const Vec3 p = a.index_to_mm(index), q = b.index_to_mm(index);
    if (!(length(p - q) < 0.01 * b.voxel_mm() + 1e-3 * length(q - b.origin_mm))) return false;
  }
  return true;
}

}  // namespace

OpenedVolume open_nifti(const fs::path& file) {
  const std::string head = unpacked_head(file);
  std::int32_t mark = 0;
  std::memcpy(&mark, head.data(), sizeof mark);
  const bool swapped = mark != 348;
  const Fields f(head, swapped);
  if (f.at<std::int32_t>(0) != 348)
    refuse_file(file, "is not a NIfTI-1 file: its header does not start with 348");
  if (std::memcmp(head.data() + 344, "n+1", 3) != 0)
    refuse_file(file, "only single-file NIfTI-1 (.nii) is read, not header and image apart");
  const auto dims = f.at<std::int16_t>(40);
  bool deeper = false;
  for (std::int16_t d = 4; d <= dims && d <= 7; ++d)
    deeper = deeper || f.at<std::int16_t>(40 + 2 * static_cast<std::size_t>(d)) > 1;
  if (dims < 3 || dims > 7 || deeper) refuse_file(file, "needs three dimensions");
  OpenedVolume out;
  out.format = "NIfTI";
  VolumeGeometry geometry;
  for (std::size_t a = 0; a < 3; ++a) {
    geometry.size[a] = f.at<std::int16_t>(42 + 2 * a);
    geometry.spacing_mm[a] = f.at<float>(80 + 4 * a);
  }
  out.has_voxel_size = true;
  const bool has_quaternion = f.at<std::int16_t>(252) > 0, has_affine = f.at<std::int16_t>(254) > 0;
  if (has_quaternion) from_quaternion(f, geometry);
  if (has_affine) {
    // Beside a quaternion the affine form may mean another space; where it means the same, it is more exact:
    // near half a turn the quaternion's fourth part, not stored, comes out with half of the digits.
    VolumeGeometry affine = geometry;
    from_affine(f, affine);
    if (!has_quaternion || is_same_place(affine, geometry)) geometry = affine;
  }
  // NIfTI's x and y point right and forward; ours are kept as in the other formats (left, backward).
  for (std::size_t i = 0; i < 6; ++i) geometry.direction[i] = 0.0 - geometry.direction[i];
  geometry.origin_mm[0] = 0.0 - geometry.origin_mm[0];
  geometry.origin_mm[1] = 0.0 - geometry.origin_mm[1];
  const auto units = static_cast<int>(head[123]) & 7;
  const double scale = units == 1 ? 1000 : units == 3 ? 0.001 : 1;  // metre, micrometre, else mm
  for (std::size_t a = 0; a < 3; ++a) {
    geometry.spacing_mm[a] *= scale;
    geometry.origin_mm[a] *= scale;
  }
  VoxelType type = VoxelType::u8;
  switch (f.at<std::int16_t>(70)) {
    case 2:
      type = VoxelType::u8;
      break;
    case 4:
      type = VoxelType::i16;
      break;
    case 16:
      type = VoxelType::f32;
      break;
    case 256:
      type = VoxelType::i8;
      break;
    case 512:
      type = VoxelType::u16;
      break;
    default:
      refuse_file(file, "its voxel type is not read; export 8- or 16-bit integers or 32-bit floats");
  }
  const double offset = static_cast<double>(f.at<float>(108));
  if (!(offset >= 348 && offset < 1e9))
    refuse_file(file, "its data offset is not plausible; the header is damaged");
  const bool big_endian = swapped == (std::endian::native == std::endian::little);
  const bool packed = static_cast<unsigned char>(file_head(file, 2)[0]) == 0x1f;
  out.source = packed
                   ? inflate_volume(file, 0, geometry, type, big_endian, static_cast<std::uint64_t>(offset))
                   : map_volume(file, static_cast<std::uint64_t>(offset), geometry, type, big_endian);
  const float slope = f.at<float>(112), intercept = f.at<float>(116);
  if (slope != 0 && (slope != 1 || intercept != 0)) {  // a slope of 0 means none
    if (!std::isfinite(slope) || !std::isfinite(intercept))
      refuse_file(file, "its slope or intercept is not finite; the header is damaged");
    out.source = std::make_unique<ScaledVolume>(std::move(out.source), slope, intercept);
  }
  out.data_files.push_back(file);
  return out;
}

}  // namespace halfmark
