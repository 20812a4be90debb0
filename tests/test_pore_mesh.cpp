// Pore meshes are closed, turn outwards and hold about the volume of their voxels.
#include <map>

#include "analysis/surface.h"
#include "reports/pore_mesh.h"
#include "tests/support/catch.h"

using namespace halfmark;

namespace {

VolumeGeometry grid() {
  VolumeGeometry g;
  g.size = {24, 24, 24};
  g.spacing_mm = {0.5, 0.5, 0.75};
  g.origin_mm = {3, -2, 1};
  return g;
}

template <class Label>
RunLabels labels_where(const VolumeGeometry& g, Label&& label) {
  RunLabels labels(g.size);
  for (std::int32_t z = 0; z < g.size[2]; ++z) {
    for (std::int32_t y = 0; y < g.size[1]; ++y) {
      for (std::int32_t x = 0; x < g.size[0]; ++x)
        if (const int l = label(x, y, z)) labels.add_run({x, x + 1, l});
      labels.end_row();
    }
  }
  return labels;
}

int ball(int x, int y, int z) {
  const double r2 = (x - 11.3) * (x - 11.3) + (y - 11.6) * (y - 11.6) + (z - 11.9) * (z - 11.9);
  return r2 <= 64 ? 7 : 0;
}

// Each directed edge is met by as many opposite ones.
bool is_closed(const TriangleMesh& mesh) {
  std::map<std::pair<std::uint32_t, std::uint32_t>, int> edges;
  for (const auto& t : mesh.triangles)
    for (std::size_t i = 0; i < 3; ++i) {
      const std::uint32_t a = t[i], b = t[(i + 1) % 3];
      edges[std::minmax(a, b)] += a < b ? 1 : -1;
    }
  for (const auto& [edge, balance] : edges)
    if (balance != 0) return false;
  return true;
}

}  // namespace

TEST_CASE("The mesh of a ball is closed and holds the volume of its voxels") {
  const VolumeGeometry g = grid();
  const RunLabels labels = labels_where(g, ball);
  const TriangleMesh mesh = PoreMesher(labels, g).mesh_of(7);
  const double voxels = static_cast<double>(labels.voxel_count()) * g.voxel_volume_mm3();
  const double volume = enclosed_volume_mm3(mesh);
  CAPTURE(voxels, volume, volume - voxels);
  CHECK(is_closed(mesh));
  CHECK(volume == Approx(voxels).epsilon(1e-4));
  CHECK(PoreMesher(labels, g).mesh_of(6).triangles.empty());
}

TEST_CASE(
    "Voxels at the volume's corner, single voxels and voxels that touch along an edge make closed meshes") {
  const VolumeGeometry g = grid();
  const RunLabels labels = labels_where(g, [](int x, int y, int z) {
    if (x == 0 && y == 0 && z == 0) return 1;
    if ((x == 5 && y == 5 && z == 5) || (x == 6 && y == 6 && z == 5) || (x == 7 && y == 7 && z == 6))
      return 2;
    if (x >= 22 && y >= 22 && z >= 22) return 3;
    return 0;
  });
  const PoreMesher mesher(labels, g);
  for (const int label : {1, 2, 3}) {
    const TriangleMesh mesh = mesher.mesh_of(label);
    CAPTURE(label, enclosed_volume_mm3(mesh));
    CHECK(!mesh.triangles.empty());
    CHECK(is_closed(mesh));
    CHECK(enclosed_volume_mm3(mesh) > 0);
  }
}

TEST_CASE("A mirrored volume still gives meshes that turn outwards") {
  VolumeGeometry g = grid();
  g.direction = {-1, 0, 0, 0, 1, 0, 0, 0, 1};
  CHECK(enclosed_volume_mm3(PoreMesher(labels_where(g, ball), g).mesh_of(7)) > 0);
}
