// Triangles become a picture without a graphics card: parallel projection, exact integer coverage, one
// thread, so that the bytes are the same on every machine.
#pragma once

#include <cstdint>
#include <vector>

#include "io/triangle_mesh.h"
#include "io/vec3.h"
#include "reports/colours.h"

namespace halfmark {

struct Camera {
  Vec3 right{1, 0, 0}, up{0, 0, 1}, toward{0, -1, 0};  // orthonormal; toward points at the viewer
  Vec3 centre_mm{};
  double px_per_mm = 1;
  int width = 0, height = 0;

  // x to the right and y down in pixels, then the height towards the viewer in mm.
  Vec3 project(const Vec3& mm) const {
    const Vec3 p = mm - centre_mm;
    return {0.5 * width + px_per_mm * dot(p, right), 0.5 * height - px_per_mm * dot(p, up), dot(p, toward)};
  }
};

// Looks at a box from azimuth (0: along +y, 90: along -x) and elevation, z up, so that the box fills the
// picture but for a margin.
Camera camera_at(const Vec3& min_mm, const Vec3& max_mm, double azimuth_degrees, double elevation_degrees,
                 int width, int height, double margin_px);

// The same, filled by the mesh itself.
Camera camera_for(const TriangleMesh& mesh, double azimuth_degrees, double elevation_degrees, int width,
                  int height, double margin_px);

// A scene of solid and glass-like bodies over a background.
class SceneRender {
 public:
  // Paints at `oversampling` times the camera's size and averages down.
  explicit SceneRender(const Camera& camera, const Rgb& background = paper);

  // One colour, shaded by a light beside the viewer.
  void add_solid(const TriangleMesh& mesh, const Rgb& colour);
  // A colour a vertex.
  void add_solid(const TriangleMesh& mesh, const std::vector<Rgb>& colours);
  // Clear where seen square on, denser at grazing sight: edges and outlines show, what lies inside stays
  // visible.
  void add_glass(const TriangleMesh& mesh);

  // True when a solid stands before the point by more than the tolerance.
  bool hides(const Vec3& mm, double tolerance_mm) const;

  // RGB, row by row, camera.width x camera.height. Solid bodies are seen through the glass before and behind
  // them.
  std::vector<std::uint8_t> pixels() const;

  static constexpr int oversampling = 2;

 private:
  struct Vertex {
    std::int64_t x, y;  // 1/256 of a fine pixel
    float height, facing;
    std::array<float, 3> carried;  // the normal; the shaded colour once that is known
  };
  std::vector<Vertex> transform(const TriangleMesh& mesh) const;
  void draw_solid(const TriangleMesh& mesh, std::vector<Vertex>& vertices);
  template <class Put>
  void rasterise(const Vertex& a, const Vertex& b, const Vertex& c, Put&& put) const;

  Camera camera_;
  Camera fine_;
  Rgb background_;
  std::vector<float> height_;                 // of the nearest solid, -infinity where none
  std::vector<std::array<float, 3>> colour_;  // of that solid
  std::vector<float> clear_;                  // light that passes all glass
};

}  // namespace halfmark
