#include <algorithm>
#include <cstddef>
#include <cstring>
#include <memory>
#include <mutex>
#include <vector>

#include "demo_volumes/demo_part.h"
#include "io/volume_open.h"

namespace halfmark {

namespace {

// Renders a chunk of planes at once and serves single planes from it, so that a writer that asks plane by
// plane does not pay the blur's margin for each.
class Chunked : public VolumeSource {
 public:
  explicit Chunked(const DemoPart& part) : scan_(scan_of(part.bodies, part.geometry, part.scan)) {}
  const VolumeGeometry& geometry() const override { return scan_->geometry(); }
  VoxelType voxel_type() const override { return scan_->voxel_type(); }

  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    const std::size_t plane =
        static_cast<std::size_t>(geometry().voxels_per_plane()) * bytes_per_voxel(voxel_type());
    const std::lock_guard lock(mutex_);
    for (std::int64_t z = z_begin; z < z_end; ++z) {
      if (z < first_ || z >= last_) {
        first_ = z;
        last_ = std::min(z + chunk_planes, geometry().size[2]);
        chunk_.resize(plane * static_cast<std::size_t>(last_ - first_));
        scan_->read_planes(first_, last_, chunk_.data());
      }
      std::memcpy(out + plane * static_cast<std::size_t>(z - z_begin),
                  chunk_.data() + plane * static_cast<std::size_t>(z - first_), plane);
    }
  }

 private:
  static constexpr std::int64_t chunk_planes = 64;
  std::unique_ptr<VolumeSource> scan_;
  mutable std::mutex mutex_;
  mutable std::int64_t first_ = 0, last_ = 0;
  mutable std::vector<std::byte> chunk_;
};

}  // namespace

void write_demo(const DemoPart& part, const std::filesystem::path& folder, const RunControl& control) {
  OutputSet outputs;
  outputs.make_folder(folder);
  write_volume(Chunked(part), folder / (part.name + ".mha"), control);
  outputs.write(folder / (part.name + ".spec.json"), part.spec_json);
  outputs.write(folder / (part.name + ".truth.json"), part.truth_json);
  outputs.commit();
}

}  // namespace halfmark
