// DICOM series in: order, geometry and values of known series; broken ones are told by a sentence.
#include <cstring>
#include <filesystem>
#include <fstream>
#include <string>
#include <vector>

#include "io/problem.h"
#include "io/volume_open.h"
#include "tests/support/catch.h"
#include "tests/support/dicom_files.h"
#include "tests/support/temporary_folder.h"

namespace fs = std::filesystem;
using namespace halfmark;

namespace {

struct Folder : TemporaryFolder {
  void put(const std::string& name, const std::string& bytes) const {
    std::ofstream(*this / name, std::ios::binary) << bytes;
  }
};

template <class T>
std::vector<T> voxels_of(const VolumeSource& v) {
  REQUIRE(bytes_per_voxel(v.voxel_type()) == sizeof(T));
  std::vector<T> out(static_cast<std::size_t>(v.geometry().voxel_count()));
  v.read_planes(0, v.geometry().size[2], reinterpret_cast<std::byte*>(out.data()));
  return out;
}

std::string problem_of(const fs::path& path, ExitStatus expected = ExitStatus::bad_data) {
  try {
    open_volume(path);
  } catch (const Problem& problem) {
    INFO(problem.what());
    CHECK(problem.status() == expected);
    return problem.what();
  }
  return "no problem";
}

bool has(const std::string& text, const std::string& words) {
  INFO(text);
  CHECK(text.find(words) != std::string::npos);
  return text.find(words) != std::string::npos;
}

DicomSlice slice_at(int k) {
  DicomSlice s;
  s.number = k + 1;
  s.position = "1.5\\-2.25\\" + std::to_string(3 + 0.25 * k);
  for (int i = 0; i < 12; ++i) s.voxels.push_back(static_cast<std::uint16_t>(1000 * k + i + 40000));
  return s;
}

}  // namespace

TEST_CASE("a series is ordered by the slices' positions, whatever their file names and numbers say") {
  const Folder folder;
  for (int k = 0; k < 5; ++k) {
    DicomSlice s = slice_at(k);
    s.number = 20 - k;
    folder.put("s" + std::to_string((k * 2) % 5) + ".dcm", dicom_bytes(s));
  }
  folder.put("notes.txt", "not a slice");
  const OpenedVolume volume = open_volume(folder.path());
  const VolumeGeometry& g = volume.source->geometry();
  CHECK(volume.format == "DICOM");
  CHECK(volume.has_voxel_size);
  CHECK(volume.data_files.size() == 5);
  CHECK(volume.scan.at("voltage_kv") == "160");
  CHECK(g.size == std::array<std::int64_t, 3>{4, 3, 5});
  CHECK(length(g.spacing_mm - Vec3{0.1, 0.2, 0.25}) < 1e-9);
  CHECK(length(g.origin_mm - Vec3{1.5, -2.25, 3}) < 1e-9);
  CHECK(g.direction == std::array<double, 9>{1, 0, 0, 0, 1, 0, 0, 0, 1});
  REQUIRE(volume.source->voxel_type() == VoxelType::u16);
  const auto voxels = voxels_of<std::uint16_t>(*volume.source);
  for (int k = 0; k < 5; ++k) {
    for (int i = 0; i < 12; ++i)
      CHECK(static_cast<int>(voxels[static_cast<std::size_t>(12 * k + i)]) == 1000 * k + i + 40000);
  }
  // One of its files stands for the series.
  CHECK(open_volume(folder.path() / "s0.dcm").source->geometry().size[2] == 5);
}

TEST_CASE("turned slices: rows along y, columns along -x, positions along z") {
  const Folder folder;
  for (int k = 0; k < 3; ++k) {
    DicomSlice s = slice_at(k);
    s.orientation = "0\\1\\0\\-1\\0\\0";
    folder.put(std::to_string(9 - k), dicom_bytes(s));
  }
  const OpenedVolume volume = open_volume(folder.path());
  const VolumeGeometry& g = volume.source->geometry();
  const Vec3 place = g.index_to_mm({3, 2, 1}), truth{1.5 - 2 * 0.2, -2.25 + 3 * 0.1, 3.25};
  INFO(place[0] << " " << place[1] << " " << place[2]);
  CHECK(length(place - truth) < 1e-9);
}

TEST_CASE("slices that run against their normal are put along it") {
  const Folder folder;
  for (int k = 0; k < 3; ++k) {
    DicomSlice s = slice_at(k);
    s.orientation = "1\\0\\0\\0\\-1\\0";  // the normal points along -z
    folder.put(std::to_string(k), dicom_bytes(s));
  }
  const OpenedVolume volume = open_volume(folder.path());
  CHECK(length(volume.source->geometry().index_to_mm({0, 0, 2}) - Vec3{1.5, -2.25, 3}) < 1e-9);
  CHECK(static_cast<int>(voxels_of<std::uint16_t>(*volume.source)[24]) == 40000);
}

TEST_CASE("signed voxels and rescaled values") {
  const Folder is_signed, whole, fraction, mixed;
  for (int k = 0; k < 2; ++k) {
    DicomSlice s = slice_at(k);
    s.voxels.assign(12, static_cast<std::uint16_t>(-1000 - k));
    s.is_signed = true;
    is_signed.put(std::to_string(k), dicom_bytes(s));
    s.slope = "2";
    s.intercept = "-24";
    whole.put(std::to_string(k), dicom_bytes(s));
    s.slope = "0.5";
    fraction.put(std::to_string(k), dicom_bytes(s));
    s.slope = k == 0 ? "0.25" : "1";  // another factor in each slice
    mixed.put(std::to_string(k), dicom_bytes(s));
  }
  const OpenedVolume plain = open_volume(is_signed.path());
  CHECK(plain.source->voxel_type() == VoxelType::i16);
  CHECK(voxels_of<std::int16_t>(*plain.source)[12] == -1001);
  // 16 bits times two need more than 16.
  CHECK(voxels_of<float>(*open_volume(whole.path()).source)[12] == -2026);
  CHECK(voxels_of<float>(*open_volume(fraction.path()).source)[12] == -524.5f);
  const auto values = voxels_of<float>(*open_volume(mixed.path()).source);
  CHECK(values[0] == -274.0f);
  CHECK(values[12] == -1025.0f);
}

TEST_CASE("a file of many frames is a volume") {
  const Folder folder;
  DicomSlice s;
  s.frames = 3;
  folder.put("frames.dcm", dicom_bytes(s));
  const OpenedVolume volume = open_volume(folder.path() / "frames.dcm");
  CHECK(volume.source->geometry().size == std::array<std::int64_t, 3>{4, 3, 3});
  CHECK(static_cast<int>(voxels_of<std::uint16_t>(*volume.source)[35]) == 35);
}

TEST_CASE("series without positions go by their numbers") {
  const Folder folder;
  for (int k = 0; k < 3; ++k) {
    DicomSlice s = slice_at(k);
    s.position.clear();
    s.number = 7 - k;
    folder.put(std::to_string(k) + ".dcm", dicom_bytes(s));
  }
  CHECK(static_cast<int>(voxels_of<std::uint16_t>(*open_volume(folder.path()).source)[0]) == 42000);
  DicomSlice s = slice_at(3);
  s.position.clear();
  s.number = 10;
  folder.put("3.dcm", dicom_bytes(s));
  has(problem_of(folder.path()), "order is not known");
}

TEST_CASE("missing, misplaced and foreign slices are named") {
  const auto series = [](const Folder& folder, int skipped,
                         const std::vector<std::pair<int, DicomSlice>>& changed) {
    for (int k = 0; k < 6; ++k) {
      DicomSlice s = slice_at(k);
      for (const auto& [at, slice] : changed) s = at == k ? slice : s;
      if (k != skipped) folder.put("s" + std::to_string(k) + ".dcm", dicom_bytes(s));
    }
    return problem_of(folder.path());
  };
  const Folder gap, uneven, same, sideways, wide, turned, pitch, two, lone;
  const std::string missing = series(gap, 3, {});
  has(missing, "missing or misplaced");
  has(missing, "s2.dcm and s4.dcm");
  DicomSlice s = slice_at(2);
  s.position = "1.5\\-2.25\\3.6";
  has(series(uneven, -1, {{2, s}}), "missing or misplaced");
  s = slice_at(2);
  s.position = slice_at(3).position;
  has(series(same, -1, {{2, s}}), "same place");
  s = slice_at(2);
  s.position = "1.6\\-2.25\\3.5";
  has(series(sideways, -1, {{2, s}}), "sideways");
  s = slice_at(2);
  s.columns = 5;
  s.voxels.clear();
  has(series(wide, -1, {{2, s}}), "differs in size");
  s = slice_at(2);
  s.orientation = "0\\1\\0\\-1\\0\\0";
  has(series(turned, -1, {{2, s}}), "is turned");
  s = slice_at(2);
  s.spacing = "0.3\\0.1";
  has(series(pitch, -1, {{2, s}}), "differs in voxel size");
  s = slice_at(2);
  s.series = "1.2.3.5";
  has(series(two, -1, {{2, s}}), "2 DICOM series");
  lone.put("s.dcm", dicom_bytes(slice_at(0)));
  has(problem_of(lone.path()), "one DICOM slice only");
}

TEST_CASE("every truncation of a slice is refused") {
  const Folder folder;
  for (int k = 0; k < 3; ++k) folder.put(std::to_string(k) + ".dcm", dicom_bytes(slice_at(k)));
  const std::string whole = dicom_bytes(slice_at(1));
  for (std::size_t n = 0; n < whole.size(); n += n < whole.size() - 30 ? 7 : 1) {
    folder.put("1.dcm", whole.substr(0, n));
    INFO("cut to " << n << " of " << whole.size() << " bytes");
    CHECK(problem_of(folder.path()) != "no problem");
  }
  folder.put("1.dcm", "this is no slice");
  has(problem_of(folder.path()), "is named as a DICOM file");
}

TEST_CASE("headers that promise more than the file holds are refused before memory is asked for") {
  const Folder folder;
  std::string bytes = dicom_bytes(slice_at(0));
  const std::size_t rows = bytes.find(std::string("\x28\x00\x10\x00US", 6)) + 8;
  for (int k = 0; k < 3; ++k) {
    std::string huge = dicom_bytes(slice_at(k));
    std::memcpy(huge.data() + rows, "\xff\xff", 2);
    std::memcpy(huge.data() + rows + 10, "\xff\xff", 2);
    folder.put(std::to_string(k) + ".dcm", huge);
  }
  CHECK(problem_of(folder.path()) != "no problem");
}
