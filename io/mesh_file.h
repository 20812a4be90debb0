// Triangle meshes and label volumes in and out.
#pragma once

#include <filesystem>
#include <map>
#include <string>
#include <vector>

#include "io/triangle_mesh.h"

namespace halfmark {

// Binary STL (mm). Writes plainly to `path`: give it OutputSet's temporary. Throws Problem(cannot_create,
// io_error).
void write_stl(const TriangleMesh& mesh, const std::filesystem::path& path);
// Reads binary or text STL; merges equal corners. Throws Problem(input_missing, bad_data: truncated, huge,
// not finite).
TriangleMesh read_stl(const std::filesystem::path& path);
// VTK XML polygon data with one float array per vertex for each name given (each vertices_mm.size() long).
void write_vtp(const TriangleMesh& mesh, const std::map<std::string, std::vector<float>>& vertex_arrays,
               const std::filesystem::path& path);

}  // namespace halfmark
