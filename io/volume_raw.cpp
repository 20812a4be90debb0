// Raw voxels with a JSON sidecar that says how they lie.
#include <algorithm>
#include <cmath>
#include <fstream>
#include <iterator>
#include <map>
#include <nlohmann/json.hpp>

#include "io/file_volume.h"
#include "io/volume_formats.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

using nlohmann::json;

constexpr std::uintmax_t largest_sidecar = 1u << 20;

// x.raw.json or x.json beside x.raw, and the other way round.
std::pair<fs::path, fs::path> raw_and_sidecar(const fs::path& given) {
  if (given.extension() == ".json") {
    const fs::path stem = fs::path(given).replace_extension();
    const fs::path raw = stem.extension() == ".raw" ? stem : fs::path(stem).replace_extension(".raw");
    if (!fs::exists(raw))
      throw Problem(ExitStatus::input_missing, raw.string() + ": does not exist, though its sidecar " +
                                                   given.filename().string() + " does");
    return {raw, given};
  }
  for (const fs::path& sidecar :
       {fs::path(given.string() + ".json"), fs::path(given).replace_extension(".json")}) {
    if (fs::exists(sidecar)) return {given, sidecar};
  }
  throw Problem(
      ExitStatus::input_missing,
      given.string() + ": raw voxels need a sidecar " + given.filename().string() +
          R"(.json: {"size": [x, y, z], "voxel_type": "u16", "voxel_size_mm": 0.05, "byte_order": "little", "header_bytes": 0})");
}

double number(const json& value, const std::string& key, const fs::path& file) {
  if (!value.is_number()) refuse_file(file, key + " must be a number");
  return value.get<double>();
}

Vec3 three(const json& value, const std::string& key, const fs::path& file) {
  if (value.is_number()) return {value.get<double>(), value.get<double>(), value.get<double>()};
  if (!value.is_array() || value.size() != 3) refuse_file(file, key + " must be three numbers");
  return {number(value[0], key, file), number(value[1], key, file), number(value[2], key, file)};
}

VoxelType voxel_type(const json& value, const fs::path& file) {
  static const std::map<std::string, VoxelType> types{{"u8", VoxelType::u8},
                                                      {"i8", VoxelType::i8},
                                                      {"u16", VoxelType::u16},
                                                      {"i16", VoxelType::i16},
                                                      {"f32", VoxelType::f32}};
  const auto found = value.is_string() ? types.find(value.get<std::string>()) : types.end();
  if (found == types.end()) refuse_file(file, "voxel_type must be one of u8, i8, u16, i16, f32");
  return found->second;
}

}  // namespace

OpenedVolume open_raw(const fs::path& raw_or_json) {
  const auto [raw, sidecar] = raw_and_sidecar(raw_or_json);
  std::error_code error;
  if (fs::file_size(sidecar, error) > largest_sidecar || error)
    refuse_file(sidecar, "is no sidecar: larger than 1 MiB or not readable");
  std::ifstream in(sidecar, std::ios::binary);
  const std::string bytes{std::istreambuf_iterator<char>(in), {}};
  const json root = json::parse(bytes, nullptr, false);
  if (!root.is_object()) refuse_file(sidecar, "is not a JSON object");
  for (const auto& [key, value] : root.items()) {
    static const std::vector<std::string> known{"size",         "voxel_type", "voxel_size_mm", "byte_order",
                                                "header_bytes", "origin_mm",  "direction",     "scan"};
    if (std::find(known.begin(), known.end(), key) == known.end())
      refuse_file(sidecar, "unknown key '" + key + "'");
  }
  OpenedVolume out;
  out.format = "raw";
  VolumeGeometry geometry;
  const auto size = root.find("size");
  if (size == root.end() || !size->is_array() || size->size() != 3)
    refuse_file(sidecar, "size must be three whole numbers");
  for (std::size_t a = 0; a < 3; ++a) {
    if (!(*size)[a].is_number_integer()) refuse_file(sidecar, "size must be three whole numbers");
    geometry.size[a] = (*size)[a].get<std::int64_t>();
  }
  const VoxelType type = voxel_type(root.value("voxel_type", json()), sidecar);
  if (const auto spacing = root.find("voxel_size_mm"); spacing != root.end()) {
    geometry.spacing_mm = three(*spacing, "voxel_size_mm", sidecar);
    out.has_voxel_size = true;
  }
  if (const auto origin = root.find("origin_mm"); origin != root.end())
    geometry.origin_mm = three(*origin, "origin_mm", sidecar);
  if (const auto direction = root.find("direction"); direction != root.end()) {
    if (!direction->is_array() || direction->size() != 9)
      refuse_file(sidecar, "direction must be nine numbers, row by row");
    for (std::size_t i = 0; i < 9; ++i) geometry.direction[i] = number((*direction)[i], "direction", sidecar);
  }
  const std::string order = root.value("byte_order", json("little")).is_string()
                                ? root.value("byte_order", std::string("little"))
                                : "";
  if (order != "little" && order != "big") refuse_file(sidecar, "byte_order must be \"little\" or \"big\"");
  const json header = root.value("header_bytes", json(0));
  if (!header.is_number_integer() || header.get<std::int64_t>() < 0)
    refuse_file(sidecar, "header_bytes must be a whole number, 0 or more");
  if (const auto scan = root.find("scan"); scan != root.end() && scan->is_object()) {
    for (const auto& [key, value] : scan->items())
      out.scan[key] = value.is_string() ? value.get<std::string>() : value.dump();
  }
  out.source =
      map_volume(raw, static_cast<std::uint64_t>(header.get<std::int64_t>()), geometry, type, order == "big");
  out.data_files = {sidecar, raw};
  return out;
}

}  // namespace halfmark
