// Damaged files for every reader: small sound files are flipped, cut, spliced, and their numbers grown;
// reading must end well or with a Problem, and must not ask for more memory than the file can fill.
//
//   fuzz_readers [ROUNDS [SEED [KIND]]]      rounds per kind of file (default 300), seed (1), one kind only
//
// A crash leaves the file that caused it in the folder that the first line names. Build it with the preset
// `sanitizers` to see more.
#include <sys/resource.h>
#include <tiffio.h>
#include <unistd.h>
#include <vtkImageData.h>
#include <vtkNew.h>
#include <vtkXMLImageDataWriter.h>
#include <zlib.h>

#include <algorithm>
#include <cstdio>
#include <cstring>
#include <exception>
#include <filesystem>
#include <fstream>
#include <functional>
#include <iterator>
#include <random>
#include <string>
#include <vector>

#include "io/dispositions.h"
#include "io/inspection_spec.h"
#include "io/memory_volume.h"
#include "io/mesh_file.h"
#include "io/problem.h"
#include "io/volume_open.h"
#include "reports/report_json.h"
#include "tests/support/dicom_files.h"
#include "tests/support/sample_run.h"

#if defined(__SANITIZE_ADDRESS__)
// VTK reserves, without touching it, what a packed block claims: up to 4 GiB by a header of 32 bits.
extern "C" const char* __asan_default_options() {
  return "max_allocation_size_mb=8192:allocator_may_return_null=0:detect_leaks=0";
}
extern "C" const char* __ubsan_default_options() { return "halt_on_error=1:print_stacktrace=1"; }
#endif

namespace fs = std::filesystem;
using namespace halfmark;

namespace {

// What deflate and the packings of TIFF can expand to at most, with a margin for small files.
constexpr std::uint64_t largest_expansion = 1 << 16;
constexpr std::uint64_t readable_bytes = 64 << 20;

std::string bytes_of(const fs::path& file) {
  std::ifstream in(file, std::ios::binary);
  return {std::istreambuf_iterator<char>(in), {}};
}
void write_bytes(const fs::path& file, const std::string& bytes) {
  std::ofstream(file, std::ios::binary | std::ios::trunc) << bytes;
}

class Damage {
 public:
  explicit Damage(unsigned seed) : random_(seed) {}

  std::string apply(std::string bytes) {
    const int times = 1 + below(4);
    for (int i = 0; i < times && !bytes.empty(); ++i) once(bytes);
    return bytes;
  }

 private:
  int below(std::size_t n) { return static_cast<int>(random_() % std::max<std::size_t>(n, 1)); }
  // Headers stand at the beginning: half of the damage goes there.
  std::size_t place(const std::string& bytes) {
    const std::size_t range = below(2) == 0 ? std::min<std::size_t>(bytes.size(), 400) : bytes.size();
    return static_cast<std::size_t>(below(range));
  }

  void once(std::string& bytes) {
    const std::size_t at = place(bytes);
    switch (below(7)) {
      case 0:
        bytes[at] = static_cast<char>(random_());
        break;
      case 1:
        bytes[at] = static_cast<char>(bytes[at] ^ (1 << below(8)));
        break;
      case 2:
        if (below(3) == 0) bytes.resize(at);
        break;
      case 3: {  // a piece put in elsewhere
        const std::size_t from = place(bytes), count = static_cast<std::size_t>(below(64));
        const std::string piece = bytes.substr(from, count);
        if (below(2) == 0) bytes.erase(from, count);
        bytes.insert(std::min(at, bytes.size()), piece);
        break;
      }
      case 4: {  // binary numbers at their limits
        static const std::string limits[] = {std::string(8, '\xff'),
                                             std::string(8, '\0'),
                                             std::string("\xff\xff\xff\x7f", 4),
                                             std::string("\0\0\0\x80", 4),
                                             std::string("\x7f\xff\xff\xff", 4),
                                             std::string("\0\0\x80\x7f", 4)};
        const std::string& value = limits[below(6)];
        bytes.replace(at, value.size() >> below(3), value.substr(0, value.size() >> below(3)));
        break;
      }
      default:
        grow_number(bytes, at);
    }
  }

  void grow_number(std::string& bytes, std::size_t at) {
    static const char* const values[] = {"0",          "-1",         "1",          "65536",
                                         "4294967296", "2147483647", "1000000000", "99999999999",
                                         "1e308",      "nan",        "-inf",       "0.0000001"};
    const std::size_t first = bytes.find_first_of("0123456789", at);
    if (first == std::string::npos) return;
    const std::size_t end = std::min(bytes.find_first_not_of("0123456789.", first), bytes.size());
    bytes.replace(first, end - first, values[below(std::size(values))]);
  }

  std::mt19937 random_;
};

struct Kind {
  std::string name;                                  // of the file that is damaged
  std::function<void(const fs::path& folder)> make;  // writes it, and what it needs beside it
  std::function<void(const fs::path& file)> read;
};

MemoryVolume small_volume(VoxelType type) {
  VolumeGeometry g;
  g.size = {6, 5, 4};
  g.spacing_mm = {0.1, 0.2, 0.25};
  MemoryVolume volume(g, type);
  std::mt19937 random(1);
  for (std::int64_t i = 0; i < g.voxel_count() * static_cast<std::int64_t>(bytes_per_voxel(type)); ++i)
    volume.data()[i] = static_cast<std::byte>(random() % 64);
  return volume;
}

void read_volume(const fs::path& file) {
  const OpenedVolume volume = open_volume(file);
  const VolumeGeometry& g = volume.source->geometry();
  const auto bytes =
      static_cast<std::uint64_t>(g.voxel_count()) * bytes_per_voxel(volume.source->voxel_type());
  std::uint64_t held = 0;
  for (const fs::path& data : volume.data_files) held += fs::file_size(data);
  if (bytes / largest_expansion > held)
    throw std::runtime_error("a volume of " + std::to_string(bytes) + " bytes was opened from " +
                             std::to_string(held));
  if (bytes > readable_bytes) return;
  std::vector<std::byte> voxels(bytes);
  volume.source->read_planes(0, g.size[2], voxels.data());
}

std::string deflated(const std::string& bytes) {
  std::string out(compressBound(bytes.size()) + 32, '\0');
  z_stream stream{};
  deflateInit2(&stream, 6, Z_DEFLATED, 15 + 16, 8, Z_DEFAULT_STRATEGY);
  stream.next_in = reinterpret_cast<Bytef*>(const_cast<char*>(bytes.data()));
  stream.avail_in = static_cast<uInt>(bytes.size());
  stream.next_out = reinterpret_cast<Bytef*>(out.data());
  stream.avail_out = static_cast<uInt>(out.size());
  deflate(&stream, Z_FINISH);
  out.resize(stream.total_out);
  deflateEnd(&stream);
  return out;
}

// The voxels of a file written plain, packed with gzip.
void pack(const fs::path& file, const std::string& from, const std::string& to) {
  const std::size_t count = 6 * 5 * 4 * 2;
  std::string bytes = bytes_of(file), head = bytes.substr(0, bytes.size() - count);
  head.replace(head.find(from), from.size(), to);
  write_bytes(file, head + deflated(bytes.substr(bytes.size() - count)));
}

void write_tiff(const fs::path& file, int compression, bool tiled, const char* mode) {
  TIFF* tiff = TIFFOpen(file.c_str(), mode);
  std::vector<std::uint16_t> grey(32 * 32);
  for (std::size_t i = 0; i < grey.size(); ++i) grey[i] = static_cast<std::uint16_t>(i / 7);
  for (int page = 0; page < 3; ++page) {
    TIFFSetField(tiff, TIFFTAG_IMAGEWIDTH, 20);
    TIFFSetField(tiff, TIFFTAG_IMAGELENGTH, 18);
    TIFFSetField(tiff, TIFFTAG_BITSPERSAMPLE, 16);
    TIFFSetField(tiff, TIFFTAG_SAMPLESPERPIXEL, 1);
    TIFFSetField(tiff, TIFFTAG_PHOTOMETRIC, PHOTOMETRIC_MINISBLACK);
    TIFFSetField(tiff, TIFFTAG_PLANARCONFIG, PLANARCONFIG_CONTIG);
    TIFFSetField(tiff, TIFFTAG_COMPRESSION, compression);
    if (tiled) {
      TIFFSetField(tiff, TIFFTAG_TILEWIDTH, 16);
      TIFFSetField(tiff, TIFFTAG_TILELENGTH, 16);
      for (ttile_t t = 0; t < 4; ++t) TIFFWriteEncodedTile(tiff, t, grey.data(), 16 * 16 * 2);
    } else {
      TIFFSetField(tiff, TIFFTAG_ROWSPERSTRIP, 6);
      for (tstrip_t s = 0; s < 3; ++s) TIFFWriteEncodedStrip(tiff, s, grey.data(), 6 * 20 * 2);
    }
    TIFFWriteDirectory(tiff);
  }
  TIFFClose(tiff);
}

void write_vti(const fs::path& file, int form) {
  const MemoryVolume volume = small_volume(VoxelType::u16);
  vtkNew<vtkImageData> image;
  image->SetDimensions(6, 5, 4);
  image->AllocateScalars(VTK_UNSIGNED_SHORT, 1);
  std::memcpy(image->GetScalarPointer(), volume.resident(), 6 * 5 * 4 * 2);
  vtkNew<vtkXMLImageDataWriter> writer;
  writer->SetInputData(image);
  writer->SetFileName(file.c_str());
  if (form == 0) writer->SetDataModeToAppended();
  if (form == 1) writer->SetDataModeToBinary();
  if (form == 2) writer->SetDataModeToAscii();
  writer->SetEncodeAppendedData(false);
  writer->Write();
}

const char* const spec_text =
    R"({"spec_version": 1, "title": "t", "grey_levels": {"air": "auto", "material": 4100},
  "pores": {"method": "local", "min_voxels": 8}, "wall_thickness": {"max_mm": 8.0},
  "zones": [{"id": "a", "shape": "box", "min_mm": [0, 0, 0], "max_mm": [4, 2, 6]},
            {"id": "b", "shape": "skin", "depth_mm": [0.5, 1.0]}, {"id": "c", "shape": "union", "of": ["a", "b"]}],
  "requirements": [{"id": "R1", "zone": "part", "quantity": "porosity", "max": 0.5},
    {"id": "R2", "zone": "c", "quantity": "local_porosity", "max": 3, "reference": {"shape": "cube", "size_mm": 3}}],
  "decision": {"rule": "guarded", "conformance_probability": 0.95}})";

std::vector<Kind> kinds() {
  std::vector<Kind> out;
  for (const std::string name : {"v.mha", "v.mhd", "v.nrrd", "v.nhdr", "v.tif", "v.vti", "v.nii", "v.nii.gz"})
    out.push_back({name, [name](const fs::path& f) { write_volume(small_volume(VoxelType::u16), f / name); },
                   read_volume});
  const auto packed = [&](const std::string& name, const std::string& plain, const std::string& from,
                          const std::string& to) {
    out.push_back({name,
                   [=](const fs::path& f) {
                     write_volume(small_volume(VoxelType::u16), f / plain);
                     pack(f / plain, from, to);
                     fs::rename(f / plain, f / name);
                   },
                   read_volume});
  };
  packed("packed.mha", "v.mha", "CompressedData = False", "CompressedData = True");
  packed("packed.nrrd", "v.nrrd", "encoding: raw", "encoding: gzip");
  out.push_back({"v.raw.json",
                 [](const fs::path& f) { write_volume(small_volume(VoxelType::u16), f / "v.raw"); },
                 read_volume});
  const auto tiff = [&](const std::string& name, int compression, bool tiled, const char* mode) {
    out.push_back(
        {name, [=](const fs::path& f) { write_tiff(f / name, compression, tiled, mode); }, read_volume});
  };
  tiff("plain.tif", COMPRESSION_NONE, false, "wl");
  tiff("lzw.tif", COMPRESSION_LZW, false, "wl");
  tiff("deflate_tiles.tif", COMPRESSION_ADOBE_DEFLATE, true, "wb");
  tiff("big_packbits.tif", COMPRESSION_PACKBITS, false, "wl8");
  tiff("tiles.tif", COMPRESSION_NONE, true, "wl");
  for (int form = 0; form < 3; ++form) {
    const std::string name = std::string(form == 0 ? "appended" : form == 1 ? "binary" : "text") + ".vti";
    out.push_back({name, [=](const fs::path& f) { write_vti(f / name, form); }, read_volume});
  }
  out.push_back({"1.dcm",
                 [](const fs::path& f) {
                   for (int k = 0; k < 3; ++k) {
                     DicomSlice slice;
                     slice.number = k;
                     slice.position = "0\\0\\" + std::to_string(k);
                     slice.slope = "1";
                     slice.intercept = "-24";
                     write_bytes(f / (std::to_string(k) + ".dcm"), dicom_bytes(slice));
                   }
                 },
                 read_volume});
  out.push_back({"frames.dcm",
                 [](const fs::path& f) {
                   DicomSlice slice;
                   slice.frames = 3;
                   write_bytes(f / "frames.dcm", dicom_bytes(slice));
                 },
                 read_volume});
  TriangleMesh mesh;
  mesh.vertices_mm = {{0, 0, 0}, {1, 0, 0}, {0, 1, 0}, {0, 0, 1}};
  mesh.triangles = {{0, 2, 1}, {0, 1, 3}, {0, 3, 2}, {1, 2, 3}};
  out.push_back({"binary.stl", [=](const fs::path& f) { write_stl(mesh, f / "binary.stl"); },
                 [](const fs::path& f) { read_stl(f); }});
  out.push_back({"text.stl",
                 [](const fs::path& f) {
                   write_bytes(
                       f / "text.stl",
                       "solid a\nfacet normal 0 0 1\nouter loop\nvertex 0 0 0\nvertex 1 0 0\nvertex 0 1 0\n"
                       "endloop\nendfacet\nendsolid\n");
                 },
                 [](const fs::path& f) { read_stl(f); }});
  out.push_back({"dispositions.json",
                 [](const fs::path& f) {
                   write_bytes(f / "dispositions.json",
                               dispositions_to_json({{{1, 2, 3}, 0.2, "seen", "inspector", "2026-01-31"},
                                                     {{4, 5, 6}, 0.5, "seen", "inspector", "2026-01-31"}}));
                 },
                 [](const fs::path& f) { read_dispositions(f); }});
  out.push_back({"spec.json", [](const fs::path& f) { write_bytes(f / "spec.json", spec_text); },
                 [](const fs::path& f) { read_spec(f); }});
  out.push_back({"result.json",
                 [](const fs::path& f) {
                   static const MemoryVolume volume = sample::volume();
                   write_bytes(f / "result.json", result_to_json(sample::run(volume).inspection));
                 },
                 [](const fs::path& f) { read_result(f); }});
  return out;
}

// The number of files that did neither read nor end in a Problem.
int run(const Kind& kind, const fs::path& folder, int rounds, unsigned seed) {
  fs::create_directories(folder);
  kind.make(folder);
  const fs::path file = folder / kind.name;
  const std::string sound = bytes_of(file);
  int read = 0, refused = 0, failed = 0;
  kind.read(file);
  for (int i = 0; i < rounds; ++i) {
    Damage damage(seed * 1000003u + static_cast<unsigned>(i));
    write_bytes(file, damage.apply(sound));
    try {
      kind.read(file);
      ++read;
    } catch (const Problem& problem) {
      ++refused;
      if (std::string(problem.what()).empty()) ++failed;
    } catch (const std::exception& error) {
      ++failed;
      const fs::path kept = folder.parent_path() / (std::to_string(i) + "_" + kind.name);
      fs::copy_file(file, kept, fs::copy_options::overwrite_existing);
      std::printf("%s, round %d: %s; kept as %s\n", kind.name.c_str(), i, error.what(), kept.c_str());
    }
  }
  std::printf("%-20s %6d read %6d refused %4d failed\n", kind.name.c_str(), read, refused, failed);
  std::fflush(stdout);
  return failed;
}

}  // namespace

int main(int argc, char** argv) {
  const int rounds = argc > 1 ? std::atoi(argv[1]) : 300;
  const unsigned seed = argc > 2 ? static_cast<unsigned>(std::atoi(argv[2])) : 1;
#if !defined(__SANITIZE_ADDRESS__)
  const rlimit memory{rlim_t{4} << 30, rlim_t{4} << 30};  // more is a failure
  setrlimit(RLIMIT_AS, &memory);
#endif
  const fs::path folder = fs::temp_directory_path() / ("halfmark_fuzz_" + std::to_string(::getpid()));
  std::printf("%d rounds a kind, seed %u, in %s\n", rounds, seed, folder.c_str());
  std::fflush(stdout);
  int failed = 0;
  for (const Kind& kind : kinds()) {
    if (argc > 3 && kind.name != argv[3]) continue;
    failed += run(kind, folder / kind.name, rounds, seed);
  }
  if (failed == 0) fs::remove_all(folder);
  return failed == 0 ? 0 : 1;
}
