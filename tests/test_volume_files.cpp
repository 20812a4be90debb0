// Volumes in and out: round trips of every format and type, other libraries' readers, broken files.
#include <cstring>
#include <filesystem>
#include <fstream>
#include <iterator>
#include <string>
#include <vector>

#include "io/file_volume.h"
#include "io/memory_volume.h"
#include "io/mesh_file.h"
#include "io/volume_open.h"
#include "tests/support/catch.h"
#include "tests/support/temporary_folder.h"

namespace fs = std::filesystem;
using namespace halfmark;

namespace {

std::string bytes_of(const fs::path& file) {
  std::ifstream in(file, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}
void write_bytes(const fs::path& file, const std::string& bytes) {
  std::ofstream(file, std::ios::binary) << bytes;
}

MemoryVolume sample(VoxelType type) {
  VolumeGeometry g;
  g.size = {5, 4, 3};
  g.spacing_mm = {0.1, 0.2, 0.25};
  g.origin_mm = {1.5, -2.25, 3};
  g.direction = {0, -1, 0, 1, 0, 0, 0, 0, 1};  // turned by 90 degrees about z
  MemoryVolume volume(g, type);
  visit_voxel_type(type, [&](auto* t) {
    using T = std::remove_pointer_t<decltype(t)>;
    for (int i = 0; i < 60; ++i)
      volume.voxels<T>()[i] = static_cast<T>(i * 2 - (std::is_signed_v<T> ? 50 : 0));
  });
  return volume;
}

std::vector<std::byte> planes_of(const VolumeSource& v) {
  std::vector<std::byte> out(static_cast<std::size_t>(v.geometry().voxel_count()) *
                             bytes_per_voxel(v.voxel_type()));
  v.read_planes(0, v.geometry().size[2], out.data());
  return out;
}

// The problem's sentence; an empty one when the volume opens and reads.
std::string problem_of(const fs::path& path, ExitStatus expected = ExitStatus::bad_data) {
  try {
    planes_of(*open_volume(path).source);
  } catch (const Problem& problem) {
    INFO(problem.what());
    CHECK(problem.status() == expected);
    return problem.what();
  }
  return "";
}

std::string meta_header(const std::string& changed_key, const std::string& value) {
  std::string out;
  for (const auto& [key, text] :
       std::vector<std::pair<std::string, std::string>>{{"ObjectType", "Image"},
                                                        {"NDims", "3"},
                                                        {"DimSize", "4 4 4"},
                                                        {"ElementSpacing", "1 1 1"},
                                                        {"ElementType", "MET_UCHAR"},
                                                        {"ElementDataFile", "LOCAL"}}) {
    out += key + " = " + (key == changed_key ? value : text) + "\n";
  }
  return out;
}

}  // namespace

TEST_CASE("every format and voxel type comes back as it was written") {
  const TemporaryFolder folder;
  for (const std::string name :
       {"v.mha", "v.mhd", "v.nrrd", "v.nhdr", "v.raw", "v.vti", "v.nii", "v.nii.gz", "v.tif"}) {
    for (const VoxelType type :
         {VoxelType::u8, VoxelType::i8, VoxelType::u16, VoxelType::i16, VoxelType::f32}) {
      INFO(name << ", type " << static_cast<int>(type));
      const MemoryVolume written = sample(type);
      write_volume(written, folder / name);
      const OpenedVolume read = open_volume(folder / name);
      CHECK(read.source->voxel_type() == type);
      CHECK(read.source->geometry().size == written.geometry().size);
      CHECK((planes_of(*read.source) == planes_of(written)));
      if (name == "v.tif") {
        CHECK_FALSE(read.has_voxel_size);
        continue;
      }
      CHECK(read.has_voxel_size);
      const Vec3 truth = written.geometry().index_to_mm({3, 2, 1}),
                 place = read.source->geometry().index_to_mm({3, 2, 1});
      CHECK(length(place - truth) < 1e-5);
      CHECK(length(read.source->geometry().spacing_mm - written.geometry().spacing_mm) < 1e-6);
    }
  }
}

TEST_CASE("big-endian voxels are turned, a given voxel size wins") {
  const TemporaryFolder folder;
  write_bytes(folder / "b.raw", std::string("\x01\x02\x03\x04\x05\x06\x07\x08", 8));
  write_bytes(folder / "b.raw.json", R"({"size": [2, 1, 2], "voxel_type": "u16", "byte_order": "big"})");
  OpenOptions options;
  options.voxel_size_mm = Vec3{0.5, 0.5, 0.5};
  const OpenedVolume volume = open_volume(folder / "b.raw", options);
  const auto bytes = planes_of(*volume.source);
  std::uint16_t first = 0;
  std::memcpy(&first, bytes.data(), 2);
  CHECK(first == 0x0102);
  CHECK(volume.source->geometry().spacing_mm[2] == 0.5);
}

TEST_CASE("folders of slices are ordered by number; gaps and strangers are named") {
  const TemporaryFolder folder;
  const auto slice = [&](const std::string& name, std::int64_t width, int value) {
    VolumeGeometry g;
    g.size = {width, 3, 2};
    MemoryVolume two(g, VoxelType::u8);
    std::fill_n(two.voxels<std::uint8_t>(), g.voxel_count(), static_cast<std::uint8_t>(value));
    write_volume(two, folder / name);  // two pages: only the first is the slice
  };
  slice("s_9.tif", 4, 9);
  slice("s_10.tif", 4, 10);
  slice("s_11.tif", 4, 11);
  const auto bytes = planes_of(*open_volume(folder.path()).source);
  REQUIRE(bytes.size() == 36);
  CHECK(static_cast<int>(bytes[0]) == 9);
  CHECK(static_cast<int>(bytes[35]) == 11);
  slice("s_13.tif", 4, 13);
  CHECK(problem_of(folder.path()).find("12 is missing") != std::string::npos);
  slice("s_12.tif", 5, 12);
  CHECK(problem_of(folder.path()).find("differs in size") != std::string::npos);
}

TEST_CASE("headers that lie are told so") {
  const TemporaryFolder folder;
  const auto with = [&](const std::string& key, const std::string& value, std::size_t bytes = 64) {
    write_bytes(folder / "h.mha", meta_header(key, value) + std::string(bytes, 'x'));
    return problem_of(folder / "h.mha");
  };
  CHECK(with("", "").empty());
  CHECK(with("", "", 63).find("truncated") != std::string::npos);
  CHECK(with("DimSize", "0 4 4").find("at least 1") != std::string::npos);
  CHECK(with("DimSize", "-4 4 4").find("at least 1") != std::string::npos);
  CHECK_FALSE(with("DimSize", "2000000000 2000000000 2000000000").empty());
  CHECK_FALSE(with("DimSize", "100000 100000 100000").empty());
  CHECK(with("DimSize", "8 8 1").find("one slice") != std::string::npos);
  for (const char* spacing : {"0 1 1", "-1 1 1", "nan 1 1", "inf 1 1"})
    CHECK_FALSE(with("ElementSpacing", spacing).empty());
  CHECK(with("ElementType", "MET_DOUBLE").find("MET_DOUBLE") != std::string::npos);
  CHECK(with("NDims", "2").find("NDims") != std::string::npos);
  for (const char* file : {"../secret.raw", "/etc/hostname", "a/../../x.raw"}) {
    write_bytes(folder / "h.mhd", meta_header("ElementDataFile", file));
    CHECK(problem_of(folder / "h.mhd").find("header's folder") != std::string::npos);
  }
  write_bytes(folder / "h.mhd", meta_header("ElementDataFile", "absent.raw"));
  CHECK(problem_of(folder / "h.mhd", ExitStatus::input_missing).find("absent.raw") != std::string::npos);
  write_bytes(folder / "e.mha", "");
  CHECK(problem_of(folder / "e.mha").find("empty") != std::string::npos);
  CHECK(problem_of(folder / "none.mha", ExitStatus::input_missing).find("does not exist") !=
        std::string::npos);
  write_bytes(folder / "x.xyz", "what is this");
  CHECK(problem_of(folder / "x.xyz").find("no format") != std::string::npos);
}

TEST_CASE("a piece of image data that is larger than the whole is refused before it takes memory") {
  const TemporaryFolder folder;
  write_volume(sample(VoxelType::u16), folder / "p.vti");
  std::string bytes = bytes_of(folder / "p.vti");
  const std::string piece = "<Piece Extent=\"0 4";
  const std::size_t at = bytes.find(piece);
  REQUIRE(at != std::string::npos);
  write_bytes(folder / "p.vti", bytes.replace(at, piece.size(), "<Piece Extent=\"0 1000000000"));
  CHECK(problem_of(folder / "p.vti").find("within the whole") != std::string::npos);
}

TEST_CASE("a packed TIFF that promises far more than its bytes can hold is refused") {
  const TemporaryFolder folder;
  const auto number = [](std::uint32_t v, int bytes) {
    std::string out;
    for (int i = 0; i < bytes; ++i) out += static_cast<char>((v >> (8 * i)) & 255);
    return out;
  };
  const auto picture = [&](std::uint32_t edge) {
    std::string out = "II*" + std::string(1, '\0') + number(8, 4);
    for (int page = 0; page < 2; ++page) {
      const std::uint32_t entries[][3] = {{256, 4, edge}, {257, 4, edge}, {258, 3, 8},
                                          {259, 3, 8},    {262, 3, 1},    {273, 4, 0},
                                          {277, 3, 1},    {278, 4, edge}, {279, 4, 4}};
      out += number(9, 2);
      for (const auto& [tag, type, value] : entries)
        out += number(tag, 2) + number(type, 2) + number(1, 4) + number(value == 0 ? 8 : value, 4);
      out += number(page == 0 ? static_cast<std::uint32_t>(out.size()) + 4 : 0, 4);
    }
    return out;
  };
  write_bytes(folder / "b.tif", picture(1 << 20));
  CHECK(problem_of(folder / "b.tif").find("far more than") != std::string::npos);
}

TEST_CASE("every truncation of every format is refused or read whole, never worse") {
  const TemporaryFolder folder;
  for (const std::string name : {"t.mha", "t.nrrd", "t.nii", "t.nii.gz", "t.tif", "t.vti"}) {
    write_volume(sample(VoxelType::u16), folder / name);
    const std::string whole = bytes_of(folder / name);
    const std::size_t step = std::max<std::size_t>(1, whole.size() / 150);
    for (std::size_t n = 0; n < whole.size(); n += step) {
      write_bytes(folder / ("cut_" + name), whole.substr(0, n));
      INFO(name << " cut to " << n << " of " << whole.size() << " bytes");
      // The last bytes of a .vti close its tags, those of a .gz hold a checksum: voxels may be whole without
      // them.
      const bool may_read = n + 40 > whole.size();
      const std::string problem = problem_of(folder / ("cut_" + name));
      if (!may_read) CHECK_FALSE(problem.empty());
    }
  }
}

TEST_CASE("meshes come back; broken ones are refused") {
  const TemporaryFolder folder;
  TriangleMesh mesh;
  mesh.vertices_mm = {{0, 0, 0}, {1, 0, 0}, {0, 1, 0}, {0, 0, 1}};
  mesh.triangles = {{0, 2, 1}, {0, 1, 3}, {0, 3, 2}, {1, 2, 3}};
  write_stl(mesh, folder / "m.stl");
  const TriangleMesh back = read_stl(folder / "m.stl");
  CHECK(back.triangles.size() == 4);
  CHECK(back.vertices_mm.size() == 4);
  const std::string whole = bytes_of(folder / "m.stl");
  for (std::size_t n = 0; n < whole.size(); n += 7) {
    write_bytes(folder / "cut.stl", whole.substr(0, n));
    CHECK_THROWS_AS(read_stl(folder / "cut.stl"), Problem);
  }
  write_bytes(folder / "text.stl",
              "solid a\nfacet normal 0 0 1\nouter loop\nvertex 0 0 0\nvertex 1 0 0\nvertex 0 1 "
              "0\nendloop\nendfacet\nendsolid\n");
  CHECK(read_stl(folder / "text.stl").triangles.size() == 1);
}
