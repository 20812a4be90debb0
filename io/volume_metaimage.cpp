// MetaImage (.mha, .mhd): "key = value" lines, the last one ElementDataFile.
#include <map>
#include <sstream>

#include "io/file_volume.h"
#include "io/volume_formats.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

constexpr std::size_t longest_header = 64 << 10;

struct Header {
  std::map<std::string, std::string> fields;
  std::size_t bytes = 0;  // up to the end of ElementDataFile's line

  const std::string* find(const char* key) const {
    const auto found = fields.find(key);
    return found == fields.end() ? nullptr : &found->second;
  }
  const std::string* any(std::initializer_list<const char*> keys) const {
    for (const char* key : keys) {
      if (const std::string* value = find(key)) return value;
    }
    return nullptr;
  }
};

std::string trimmed(const std::string& text) {
  const auto first = text.find_first_not_of(" \t\r");
  return first == std::string::npos ? "" : text.substr(first, text.find_last_not_of(" \t\r") - first + 1);
}

Header read_header(const fs::path& file) {
  const std::string text = file_head(file, longest_header);
  Header header;
  for (std::size_t at = 0; at < text.size();) {
    const std::size_t end = text.find('\n', at);
    if (end == std::string::npos && text.size() == longest_header)
      refuse_file(file, "its MetaImage header has no end; the file is damaged");
    const std::string line = text.substr(at, end == std::string::npos ? std::string::npos : end - at);
    at = end == std::string::npos ? text.size() : end + 1;
    const std::size_t equals = line.find('=');
    if (equals == std::string::npos) {
      if (trimmed(line).empty()) continue;
      refuse_file(file, "is not a MetaImage: a header line without '='");
    }
    const std::string key = trimmed(line.substr(0, equals));
    header.fields[key] = trimmed(line.substr(equals + 1));
    if (key == "ElementDataFile") {
      header.bytes = at;
      return header;
    }
  }
  refuse_file(file, "its MetaImage header lacks ElementDataFile; the file is truncated or no MetaImage");
}

template <class T, std::size_t N>
std::array<T, N> numbers(const char* key, const std::string& text, const fs::path& file) {
  std::istringstream in(text);
  in.imbue(std::locale::classic());
  std::array<T, N> out;
  for (T& value : out) {
    if (!(in >> value))
      refuse_file(file, std::string(key) + " needs " + std::to_string(N) + " numbers, not '" + text + "'");
  }
  return out;
}

VoxelType voxel_type(const std::string& name, const fs::path& file) {
  static const std::map<std::string, VoxelType> types{{"MET_UCHAR", VoxelType::u8},
                                                      {"MET_CHAR", VoxelType::i8},
                                                      {"MET_USHORT", VoxelType::u16},
                                                      {"MET_SHORT", VoxelType::i16},
                                                      {"MET_FLOAT", VoxelType::f32}};
  const auto found = types.find(name);
  if (found == types.end())
    refuse_file(file, "voxel type " + name + " is not read; export 8- or 16-bit integers or 32-bit floats");
  return found->second;
}

bool is_true(const std::string* text) {
  return text != nullptr && !text->empty() && ((*text)[0] == 'T' || (*text)[0] == 't' || (*text)[0] == '1');
}

}  // namespace

OpenedVolume open_metaimage(const fs::path& file) {
  const Header header = read_header(file);
  const std::string* dims = header.find("NDims");
  if (dims == nullptr || *dims != "3")
    refuse_file(file, "NDims must be 3; it is " + (dims == nullptr ? std::string("missing") : *dims));
  const std::string* channels = header.find("ElementNumberOfChannels");
  if (channels != nullptr && *channels != "1")
    refuse_file(file, "has " + *channels + " channels; a grey-value volume has one");
  const std::string *size = header.find("DimSize"), *type_name = header.find("ElementType");
  if (size == nullptr || type_name == nullptr) refuse_file(file, "its header lacks DimSize or ElementType");
  OpenedVolume out;
  out.format = "MetaImage";
  VolumeGeometry geometry;
  geometry.size = numbers<std::int64_t, 3>("DimSize", *size, file);
  if (const std::string* spacing = header.any({"ElementSpacing", "ElementSize"})) {
    geometry.spacing_mm = numbers<double, 3>("ElementSpacing", *spacing, file);
    out.has_voxel_size = true;
  }
  if (const std::string* origin = header.any({"Offset", "Position", "Origin"}))
    geometry.origin_mm = numbers<double, 3>("Offset", *origin, file);
  if (const std::string* matrix = header.any({"TransformMatrix", "Rotation", "Orientation"})) {
    const auto m = numbers<double, 9>("TransformMatrix", *matrix, file);
    for (std::size_t axis = 0; axis < 3; ++axis) {  // listed axis by axis
      for (std::size_t row = 0; row < 3; ++row) geometry.direction[3 * row + axis] = m[3 * axis + row];
    }
  }
  const VoxelType type = voxel_type(*type_name, file);
  const bool big_endian = is_true(header.any({"BinaryDataByteOrderMSB", "ElementByteOrderMSB"}));
  const std::string& data = *header.find("ElementDataFile");
  const bool local = data == "LOCAL" || data == "Local" || data == "local";
  if (!local && (data.rfind("LIST", 0) == 0 || data.find('%') != std::string::npos))
    refuse_file(file, "lists several data files; join them into one, or open the folder of slices");
  const fs::path data_file = local ? file : data_file_beside(file, data);
  std::uint64_t offset = local ? header.bytes : 0;
  if (const std::string* skip = header.find("HeaderSize"); skip != nullptr && !local) {
    const auto bytes = numbers<std::int64_t, 1>("HeaderSize", *skip, file)[0];
    if (bytes < -1) refuse_file(file, "HeaderSize must be -1 or more");
    if (bytes == -1) {
      std::error_code error;
      const std::uint64_t have = fs::file_size(data_file, error),
                          want = checked_byte_count(geometry, type, file);
      offset = !error && have >= want ? have - want : 0;
    } else {
      offset = static_cast<std::uint64_t>(bytes);
    }
  }
  if (const std::string* binary = header.find("BinaryData"); binary != nullptr && !is_true(binary))
    refuse_file(file, "holds its voxels as text; export binary data");
  const bool compressed = is_true(header.find("CompressedData"));
  out.source = compressed ? inflate_volume(data_file, offset, geometry, type, big_endian)
                          : map_volume(data_file, offset, geometry, type, big_endian);
  out.data_files.push_back(file);
  if (!local) out.data_files.push_back(data_file);
  return out;
}

}  // namespace halfmark
