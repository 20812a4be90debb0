// NRRD (.nrrd, .nhdr): "field: value" lines up to an empty one, then or elsewhere the voxels.
#include <cctype>
#include <cmath>
#include <map>
#include <sstream>

#include "io/file_volume.h"
#include "io/volume_formats.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

constexpr std::size_t longest_header = 64 << 10;

std::string lower(std::string text) {
  for (char& c : text) c = static_cast<char>(std::tolower(static_cast<unsigned char>(c)));
  return text;
}

std::string trimmed(const std::string& text) {
  const auto first = text.find_first_not_of(" \t\r");
  return first == std::string::npos ? "" : text.substr(first, text.find_last_not_of(" \t\r") - first + 1);
}

struct Header {
  std::map<std::string, std::string> fields;
  std::map<std::string, std::string> values;  // key:=value lines
  std::size_t bytes = 0;
  std::string get(const char* key) const {
    const auto found = fields.find(key);
    return found == fields.end() ? "" : found->second;
  }
};

Header read_header(const fs::path& file) {
  const std::string text = file_head(file, longest_header);
  if (text.rfind("NRRD000", 0) != 0)
    refuse_file(file, "is not an NRRD file: its first line lacks the NRRD mark");
  Header header;
  for (std::size_t at = text.find('\n') + 1; at != 0 && at < text.size();) {
    const std::size_t end = text.find('\n', at);
    const std::string line =
        trimmed(text.substr(at, end == std::string::npos ? std::string::npos : end - at));
    if (end == std::string::npos && text.size() == longest_header) break;
    at = end == std::string::npos ? text.size() : end + 1;
    if (line.empty()) {
      header.bytes = at;
      return header;
    }
    if (line[0] == '#') continue;
    const std::size_t colon = line.find(':');
    if (colon == std::string::npos) refuse_file(file, "a header line without ':'; the header is damaged");
    if (colon + 1 < line.size() && line[colon + 1] == '=') {
      header.values[line.substr(0, colon)] = line.substr(colon + 2);
    } else {
      header.fields[lower(trimmed(line.substr(0, colon)))] = trimmed(line.substr(colon + 1));
    }
  }
  if (!header.get("data file").empty() ||
      !header.get("datafile").empty()) {  // a detached header may end with the file
    header.bytes = text.size();
    return header;
  }
  refuse_file(file, "its NRRD header has no end; the file is truncated");
}

VoxelType voxel_type(const std::string& name, const fs::path& file) {
  static const std::map<std::string, VoxelType> types{
      {"uchar", VoxelType::u8},           {"unsigned char", VoxelType::u8},
      {"uint8", VoxelType::u8},           {"uint8_t", VoxelType::u8},
      {"signed char", VoxelType::i8},     {"int8", VoxelType::i8},
      {"int8_t", VoxelType::i8},          {"ushort", VoxelType::u16},
      {"unsigned short", VoxelType::u16}, {"unsigned short int", VoxelType::u16},
      {"uint16", VoxelType::u16},         {"uint16_t", VoxelType::u16},
      {"short", VoxelType::i16},          {"short int", VoxelType::i16},
      {"signed short", VoxelType::i16},   {"signed short int", VoxelType::i16},
      {"int16", VoxelType::i16},          {"int16_t", VoxelType::i16},
      {"float", VoxelType::f32}};
  const auto found = types.find(lower(name));
  if (found == types.end())
    refuse_file(file, "voxel type '" + name + "' is not read; export 8- or 16-bit integers or 32-bit floats");
  return found->second;
}

std::vector<double> numbers(std::string text) {
  for (char& c : text) {
    if (c == '(' || c == ')' || c == ',') c = ' ';
  }
  std::istringstream in(text);
  in.imbue(std::locale::classic());
  std::vector<double> out;
  for (std::string word; in >> word;) {
    std::istringstream one(word);
    one.imbue(std::locale::classic());
    double value = std::nan("");
    one >> value;
    out.push_back(one ? value : std::nan(""));
  }
  return out;
}

void read_geometry(const Header& header, const fs::path& file, OpenedVolume& out, VolumeGeometry& geometry) {
  const auto sizes = numbers(header.get("sizes"));
  if (header.get("dimension") != "3" || sizes.size() != 3)
    refuse_file(file, "needs dimension 3 and three sizes; colour or single slices are not read");
  for (std::size_t a = 0; a < 3; ++a)
    geometry.size[a] = sizes[a] > 0 && sizes[a] < 1e12 ? static_cast<std::int64_t>(sizes[a]) : 0;
  // Patient space "right-anterior-superior" has x and y the other way round than the common
  // "left-posterior-superior".
  const std::string space = lower(header.get("space"));
  const double flip = space == "right-anterior-superior" || space == "ras" ? -1 : 1;
  if (const auto vectors = numbers(header.get("space directions")); vectors.size() == 9) {
    for (std::size_t axis = 0; axis < 3; ++axis) {
      const Vec3 v{flip * vectors[3 * axis], flip * vectors[3 * axis + 1], vectors[3 * axis + 2]};
      geometry.spacing_mm[axis] = length(v);
      for (std::size_t row = 0; row < 3; ++row) geometry.direction[3 * row + axis] = v[row] / length(v);
    }
    out.has_voxel_size = true;
  } else if (const auto spacings = numbers(header.get("spacings")); spacings.size() == 3) {
    geometry.spacing_mm = {spacings[0], spacings[1], spacings[2]};
    out.has_voxel_size = true;
  }
  if (const auto origin = numbers(header.get("space origin")); origin.size() == 3)
    geometry.origin_mm = {flip * origin[0], flip * origin[1], origin[2]};
}

}  // namespace

OpenedVolume open_nrrd(const fs::path& file) {
  const Header header = read_header(file);
  OpenedVolume out;
  out.format = "NRRD";
  VolumeGeometry geometry;
  read_geometry(header, file, out, geometry);
  const VoxelType type = voxel_type(header.get("type"), file);
  const std::string encoding = lower(header.get("encoding")),
                    data = header.get("data file").empty() ? header.get("datafile") : header.get("data file");
  const std::string skip_text =
      header.get("byte skip").empty() ? header.get("byteskip") : header.get("byte skip");
  const auto skip = numbers(skip_text);
  if (!header.get("line skip").empty() && header.get("line skip") != "0")
    refuse_file(file, "'line skip' is not read; write the voxels without lines before them");
  if (data.rfind("LIST", 0) == 0 || data.find('%') != std::string::npos)
    refuse_file(file, "lists several data files; join them into one, or open the folder of slices");
  const fs::path data_file = data.empty() ? file : data_file_beside(file, data);
  std::uint64_t offset = data.empty() ? header.bytes : 0;
  if (!skip.empty()) {
    if (!(skip[0] >= -1 && skip[0] < 1e15)) refuse_file(file, "'byte skip' must be -1 or more");
    if (skip[0] < 0) {
      std::error_code error;
      const std::uint64_t have = fs::file_size(data_file, error),
                          want = checked_byte_count(geometry, type, file);
      offset = !error && have >= want ? have - want : offset;
    } else {
      offset += static_cast<std::uint64_t>(skip[0]);
    }
  }
  const bool big_endian = lower(header.get("endian")) == "big";
  if (encoding == "raw") {
    out.source = map_volume(data_file, offset, geometry, type, big_endian);
  } else if (encoding == "gzip" || encoding == "gz") {
    out.source = inflate_volume(data_file, offset, geometry, type, big_endian);
  } else {
    refuse_file(file, "encoding '" + encoding + "' is not read; write raw or gzip");
  }
  for (const auto& [key, value] : header.values) out.scan[key] = value;
  out.data_files.push_back(file);
  if (!data.empty()) out.data_files.push_back(data_file);
  return out;
}

}  // namespace halfmark
