#include "io/volume_open.h"

#include <openssl/evp.h>

#include <algorithm>
#include <cctype>
#include <cstring>
#include <fstream>

#include "io/dicom_file.h"
#include "io/file_volume.h"
#include "io/volume_formats.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

std::string lower_ending(const fs::path& path) {
  std::string ending = path.extension().string();
  for (char& c : ending) c = static_cast<char>(std::tolower(static_cast<unsigned char>(c)));
  return ending;
}

bool is_tiff_name(const fs::path& path) {
  return lower_ending(path) == ".tif" || lower_ending(path) == ".tiff";
}

OpenedVolume open_folder(const fs::path& folder) {
  std::vector<fs::path> files, tiffs;
  for (const auto& entry : fs::directory_iterator(folder)) {
    if (!entry.is_regular_file() || entry.path().filename().string().front() == '.') continue;
    files.push_back(entry.path());
    if (is_tiff_name(entry.path())) tiffs.push_back(entry.path());
  }
  if (files.empty())
    refuse_file(folder, "the folder is empty; give a folder of numbered TIFF slices or of one DICOM series");
  if (!tiffs.empty()) return open_tiff_folder(folder, tiffs);
  std::sort(files.begin(), files.end());
  if (std::any_of(files.begin(), files.end(), is_dicom_file)) return open_dicom(folder);
  refuse_file(folder, "holds neither TIFF slices nor a DICOM series");
}

OpenedVolume open_file(const fs::path& file) {
  const std::string ending = lower_ending(file);
  if (ending == ".raw" || ending == ".json") return open_raw(file);
  const std::string head = file_head(file, 352);
  if (ending == ".mha" || ending == ".mhd") return open_metaimage(file);
  if (ending == ".nrrd" || ending == ".nhdr" || head.rfind("NRRD000", 0) == 0) return open_nrrd(file);
  if (is_tiff_name(file) || head.rfind("II*", 0) == 0 || head.rfind("MM", 0) == 0 ||
      head.rfind("II+", 0) == 0)
    return open_tiff(file);
  if (ending == ".vti") return open_vti(file);
  if (ending == ".nii" || (ending == ".gz" && lower_ending(fs::path(file).replace_extension()) == ".nii"))
    return open_nifti(file);
  if (ending == ".dcm" || is_dicom_file(file))
    return open_dicom(file.parent_path().empty() ? fs::path(".") : file.parent_path());
  if (head.find("ObjectType") != std::string::npos && head.find("NDims") != std::string::npos)
    return open_metaimage(file);
  refuse_file(file,
              "is of no format this program reads; it reads .mha .mhd .nrrd .nhdr .tif .raw with a JSON "
              "sidecar, DICOM, .vti, .nii, .nii.gz");
}

// A volume with another voxel size.
class ResizedVolume : public VolumeSource {
 public:
  ResizedVolume(std::unique_ptr<VolumeSource> source, const Vec3& voxel_size_mm)
      : source_(std::move(source)), geometry_(source_->geometry()) {
    geometry_.spacing_mm = voxel_size_mm;
  }
  const VolumeGeometry& geometry() const override { return geometry_; }
  VoxelType voxel_type() const override { return source_->voxel_type(); }
  void read_planes(std::int64_t z_begin, std::int64_t z_end, std::byte* out) const override {
    source_->read_planes(z_begin, z_end, out);
  }
  const std::byte* resident() const override { return source_->resident(); }

 private:
  std::unique_ptr<VolumeSource> source_;
  VolumeGeometry geometry_;
};

// The last number in a file's name, without its ending.
std::optional<long long> number_in(const fs::path& file) {
  const std::string stem = file.stem().string();
  std::size_t end = stem.size();
  while (end > 0 && std::isdigit(static_cast<unsigned char>(stem[end - 1])) == 0) --end;
  std::size_t begin = end;
  while (begin > 0 && std::isdigit(static_cast<unsigned char>(stem[begin - 1])) != 0) --begin;
  if (begin == end || end - begin > 15) return std::nullopt;
  return std::stoll(stem.substr(begin, end - begin));
}

}  // namespace

std::vector<fs::path> slices_by_number(const fs::path& folder, std::vector<fs::path> files) {
  std::vector<std::pair<long long, fs::path>> numbered;
  for (fs::path& file : files) {
    const auto number = number_in(file);
    if (!number)
      refuse_file(file, "a slice without a number in its name; the order of the slices is not known");
    numbered.emplace_back(*number, std::move(file));
  }
  std::sort(numbered.begin(), numbered.end());
  for (std::size_t i = 1; i < numbered.size(); ++i) {
    const long long before = numbered[i - 1].first, now = numbered[i].first;
    if (now == before)
      refuse_file(folder, "two slices carry the number " + std::to_string(now) + " (" +
                              numbered[i - 1].second.filename().string() + ", " +
                              numbered[i].second.filename().string() + ")");
    if (now != before + 1)
      refuse_file(folder, "slice number " + std::to_string(before + 1) + " is missing (after " +
                              numbered[i - 1].second.filename().string() + " comes " +
                              numbered[i].second.filename().string() + ")");
  }
  std::vector<fs::path> out;
  for (auto& [number, file] : numbered) out.push_back(std::move(file));
  return out;
}

OpenedVolume open_volume(const fs::path& path, const OpenOptions& options) {
  std::error_code error;
  const fs::file_status status = fs::status(path, error);
  if (!fs::exists(status)) throw Problem(ExitStatus::input_missing, path.string() + ": does not exist");
  options.control.throw_if_cancelled();
  OpenedVolume out = fs::is_directory(status) ? open_folder(path) : open_file(path);
  out.path = path;
  if (options.voxel_size_mm) {
    out.source = std::make_unique<ResizedVolume>(std::move(out.source), *options.voxel_size_mm);
    out.has_voxel_size = true;
  }
  return out;
}

std::string sha256_of_files(const std::vector<fs::path>& files, const RunControl& control) {
  const std::unique_ptr<EVP_MD_CTX, decltype(&EVP_MD_CTX_free)> context(EVP_MD_CTX_new(), EVP_MD_CTX_free);
  EVP_DigestInit_ex(context.get(), EVP_sha256(), nullptr);
  std::vector<char> chunk(1 << 20);
  for (std::size_t i = 0; i < files.size(); ++i) {
    std::ifstream in(files[i], std::ios::binary);
    if (!in) throw Problem(ExitStatus::io_error, files[i].string() + ": cannot be opened again for its hash");
    while (in) {
      control.step("hash", static_cast<double>(i) / static_cast<double>(files.size()));
      in.read(chunk.data(), static_cast<std::streamsize>(chunk.size()));
      EVP_DigestUpdate(context.get(), chunk.data(), static_cast<std::size_t>(in.gcount()));
    }
  }
  unsigned char digest[EVP_MAX_MD_SIZE];
  unsigned length = 0;
  EVP_DigestFinal_ex(context.get(), digest, &length);
  std::string text;
  for (unsigned i = 0; i < length; ++i) {
    constexpr const char* digits = "0123456789abcdef";
    text += digits[digest[i] >> 4];
    text += digits[digest[i] & 15];
  }
  return text;
}

}  // namespace halfmark
