#include "io/mesh_file.h"

#include <bit>
#include <cerrno>
#include <cmath>
#include <cstdio>
#include <cstring>
#include <fstream>
#include <iterator>
#include <memory>
#include <sstream>

#include "io/problem.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

constexpr std::size_t stl_header = 80, stl_triangle = 50;
constexpr std::uintmax_t largest_stl = std::uintmax_t{4} << 30;

void put_bytes(std::string& out, const void* bytes, std::size_t count) {
  out.append(static_cast<const char*>(bytes), count);
}

void write_all(const std::string& bytes, const fs::path& path) {
  std::FILE* file = std::fopen(path.c_str(), "wb");
  if (file == nullptr)
    throw Problem(ExitStatus::cannot_create,
                  path.string() + ": cannot create the file: " + std::strerror(errno));
  const bool written = std::fwrite(bytes.data(), 1, bytes.size(), file) == bytes.size();
  const int error = errno;
  if (std::fclose(file) != 0 || !written)
    throw Problem(ExitStatus::io_error,
                  path.string() + ": cannot write: " + std::strerror(written ? errno : error));
}

using Corner = std::array<float, 3>;

[[noreturn]] void refuse(const fs::path& path, const std::string& sentence) {
  throw Problem(ExitStatus::bad_data, path.string() + ": " + sentence);
}

// Equal corners become one vertex, in order of first appearance.
TriangleMesh joined(const std::vector<Corner>& corners, const fs::path& path) {
  TriangleMesh mesh;
  std::map<Corner, std::uint32_t> numbers;
  std::array<std::uint32_t, 3> triangle{};
  for (std::size_t i = 0; i < corners.size(); ++i) {
    for (const float c : corners[i]) {
      if (!std::isfinite(c))
        refuse(path, "triangle " + std::to_string(i / 3 + 1) + " has a corner that is not finite");
    }
    const auto [found, is_new] =
        numbers.try_emplace(corners[i], static_cast<std::uint32_t>(mesh.vertices_mm.size()));
    if (is_new) mesh.vertices_mm.push_back(corners[i]);
    triangle[i % 3] = found->second;
    const bool flat = triangle[0] == triangle[1] || triangle[1] == triangle[2] || triangle[0] == triangle[2];
    if (i % 3 == 2 && !flat) mesh.triangles.push_back(triangle);
  }
  if (mesh.triangles.empty()) refuse(path, "holds no triangle");
  return mesh;
}

std::vector<Corner> text_corners(const std::string& bytes, const fs::path& path) {
  std::vector<Corner> corners;
  std::istringstream in(bytes);
  in.imbue(std::locale::classic());
  bool ended = false;
  for (std::string word; in >> word;) {
    if (word == "vertex") {
      Corner c;
      if (!(in >> c[0] >> c[1] >> c[2]))
        refuse(path,
               "a vertex without three numbers, after " + std::to_string(corners.size() / 3) + " triangles");
      corners.push_back(c);
    }
    ended = word == "endsolid" || ended;
  }
  if (!ended || corners.size() % 3 != 0)
    refuse(path, "is truncated: its text has no 'endsolid' or an incomplete triangle");
  return corners;
}

std::vector<Corner> binary_corners(const std::string& bytes, std::uint32_t count) {
  std::vector<Corner> corners(std::size_t{3} * count);
  for (std::size_t t = 0; t < count; ++t)
    std::memcpy(corners[3 * t].data(), bytes.data() + stl_header + 4 + t * stl_triangle + 12, 36);
  return corners;
}

}  // namespace

void write_stl(const TriangleMesh& mesh, const fs::path& path) {
  std::string out(stl_header, ' ');
  const std::string title = "units mm";
  std::copy(title.begin(), title.end(), out.begin());
  const auto count = static_cast<std::uint32_t>(mesh.triangles.size());
  out.reserve(stl_header + 4 + std::size_t{count} * stl_triangle);
  put_bytes(out, &count, 4);
  for (const auto& t : mesh.triangles) {
    const Corner &a = mesh.vertices_mm[t[0]], &b = mesh.vertices_mm[t[1]], &c = mesh.vertices_mm[t[2]];
    const double ux = static_cast<double>(b[0]) - a[0], uy = static_cast<double>(b[1]) - a[1],
                 uz = static_cast<double>(b[2]) - a[2];
    const double vx = static_cast<double>(c[0]) - a[0], vy = static_cast<double>(c[1]) - a[1],
                 vz = static_cast<double>(c[2]) - a[2];
    const double nx = uy * vz - uz * vy, ny = uz * vx - ux * vz, nz = ux * vy - uy * vx,
                 n = std::sqrt(nx * nx + ny * ny + nz * nz);
    const Corner normal =
        n > 0 ? Corner{static_cast<float>(nx / n), static_cast<float>(ny / n), static_cast<float>(nz / n)}
              : Corner{0, 0, 0};
    put_bytes(out, normal.data(), 12);
    for (const Corner* corner : {&a, &b, &c}) put_bytes(out, corner->data(), 12);
    const std::uint16_t attribute = 0;
    put_bytes(out, &attribute, 2);
  }
  write_all(out, path);
}

TriangleMesh read_stl(const fs::path& path) {
  std::error_code error;
  const std::uintmax_t size = fs::file_size(path, error);
  if (error) throw Problem(ExitStatus::input_missing, path.string() + ": cannot be read: " + error.message());
  if (size == 0) refuse(path, "is empty");
  if (size > largest_stl) refuse(path, "is larger than 4 GiB; reduce the mesh");
  std::ifstream in(path, std::ios::binary);
  const std::string bytes{std::istreambuf_iterator<char>(in), {}};
  std::uint32_t count = 0;
  if (bytes.size() >= stl_header + 4) std::memcpy(&count, bytes.data() + stl_header, 4);
  const bool fits =
      bytes.size() >= stl_header + 4 && bytes.size() == stl_header + 4 + std::uint64_t{count} * stl_triangle;
  if (fits) return joined(binary_corners(bytes, count), path);
  if (bytes.rfind("solid", 0) == 0) return joined(text_corners(bytes, path), path);
  refuse(path, "is no STL mesh, or truncated: it promises " + std::to_string(count) +
                   " triangles and holds " + std::to_string(bytes.size()) + " bytes");
}

void write_vtp(const TriangleMesh& mesh, const std::map<std::string, std::vector<float>>& vertex_arrays,
               const fs::path& path) {
  const std::size_t points = mesh.vertices_mm.size(), cells = mesh.triangles.size();
  std::ostringstream xml;
  std::string data;
  const auto block = [&](const void* bytes, std::uint64_t count) {
    const std::uint64_t offset = data.size();
    put_bytes(data, &count, 8);
    put_bytes(data, bytes, count);
    return offset;
  };
  const std::uint64_t at_points = block(mesh.vertices_mm.data(), points * 12);
  std::vector<std::int32_t> corners, ends;
  for (const auto& t : mesh.triangles) {
    for (const std::uint32_t c : t) corners.push_back(static_cast<std::int32_t>(c));
    ends.push_back(static_cast<std::int32_t>(corners.size()));
  }
  const std::uint64_t at_corners = block(corners.data(), corners.size() * 4),
                      at_ends = block(ends.data(), ends.size() * 4);
  xml << "<?xml version=\"1.0\"?>\n<VTKFile type=\"PolyData\" version=\"1.0\" byte_order=\"LittleEndian\" "
         "header_type=\"UInt64\">\n<PolyData>\n<Piece NumberOfPoints=\""
      << points << "\" NumberOfVerts=\"0\" NumberOfLines=\"0\" NumberOfStrips=\"0\" NumberOfPolys=\"" << cells
      << "\">\n<PointData>\n";
  for (const auto& [name, values] : vertex_arrays) {
    xml << "<DataArray type=\"Float32\" Name=\"" << name << "\" format=\"appended\" offset=\""
        << block(values.data(), values.size() * 4) << "\"/>\n";
  }
  xml << "</PointData>\n<Points><DataArray type=\"Float32\" NumberOfComponents=\"3\" format=\"appended\" "
         "offset=\""
      << at_points
      << "\"/></Points>\n<Polys><DataArray type=\"Int32\" Name=\"connectivity\" format=\"appended\" offset=\""
      << at_corners << "\"/><DataArray type=\"Int32\" Name=\"offsets\" format=\"appended\" offset=\""
      << at_ends << "\"/></Polys>\n</Piece>\n</PolyData>\n<AppendedData encoding=\"raw\">\n_";
  write_all(xml.str() + data + "\n</AppendedData>\n</VTKFile>\n", path);
}

}  // namespace halfmark
