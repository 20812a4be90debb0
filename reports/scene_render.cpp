#include "reports/scene_render.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

namespace halfmark {

namespace {

constexpr double subpixels = 256;
// Glass: what one layer takes from the light when seen square on and at grazing sight, and how late it rises.
constexpr float glass_square_on = 0.035f, glass_grazing = 0.42f;
constexpr Rgb glass_colour{0x4a, 0x5a, 0x68};
// How much of the glass before a solid is seen on it: enough to lie inside the part, not enough to hide.
constexpr float veil = 0.18f;
// A solid's shade away from the light.
constexpr float ambient = 0.55f;

std::vector<std::array<float, 3>> vertex_normals(const TriangleMesh& mesh) {
  std::vector<std::array<float, 3>> normals(mesh.vertices_mm.size(), {0, 0, 0});
  for (const auto& t : mesh.triangles) {
    const auto &a = mesh.vertices_mm[t[0]], &b = mesh.vertices_mm[t[1]], &c = mesh.vertices_mm[t[2]];
    const float ux = b[0] - a[0], uy = b[1] - a[1], uz = b[2] - a[2];
    const float vx = c[0] - a[0], vy = c[1] - a[1], vz = c[2] - a[2];
    const std::array<float, 3> n{uy * vz - uz * vy, uz * vx - ux * vz, ux * vy - uy * vx};
    for (const std::uint32_t corner : t)
      for (std::size_t k = 0; k < 3; ++k) normals[corner][k] += n[k];
  }
  for (auto& n : normals) {
    const float l = std::sqrt(n[0] * n[0] + n[1] * n[1] + n[2] * n[2]);
    if (l > 0)
      for (float& k : n) k /= l;
  }
  return normals;
}

}  // namespace

Camera camera_at(const Vec3& min_mm, const Vec3& max_mm, double azimuth_degrees, double elevation_degrees,
                 int width, int height, double margin_px) {
  const double a = azimuth_degrees * std::numbers::pi / 180, e = elevation_degrees * std::numbers::pi / 180;
  Camera camera;
  camera.width = width;
  camera.height = height;
  camera.centre_mm = 0.5 * (min_mm + max_mm);
  camera.toward = {std::sin(a) * std::cos(e), -std::cos(a) * std::cos(e), std::sin(e)};
  camera.right = {std::cos(a), std::sin(a), 0};
  camera.up = cross(camera.toward, camera.right);
  double half_right = 0, half_up = 0;
  for (int corner = 0; corner < 8; ++corner) {
    const Vec3 p{corner & 1 ? max_mm[0] : min_mm[0], corner & 2 ? max_mm[1] : min_mm[1],
                 corner & 4 ? max_mm[2] : min_mm[2]};
    half_right = std::max(half_right, std::abs(dot(p - camera.centre_mm, camera.right)));
    half_up = std::max(half_up, std::abs(dot(p - camera.centre_mm, camera.up)));
  }
  const double fit_x = half_right > 0 ? (0.5 * width - margin_px) / half_right : 1;
  const double fit_y = half_up > 0 ? (0.5 * height - margin_px) / half_up : 1;
  camera.px_per_mm = std::min(fit_x, fit_y);
  return camera;
}

Camera camera_for(const TriangleMesh& mesh, double azimuth_degrees, double elevation_degrees, int width,
                  int height, double margin_px) {
  Camera camera =
      camera_at({-1, -1, -1}, {1, 1, 1}, azimuth_degrees, elevation_degrees, width, height, margin_px);
  if (mesh.vertices_mm.empty()) return camera;
  constexpr double far = std::numeric_limits<double>::infinity();
  Vec3 low{far, far, far}, high{-far, -far, -far};  // along right, up, toward
  for (const auto& v : mesh.vertices_mm) {
    const Vec3 p{v[0], v[1], v[2]};
    const Vec3 seen{dot(p, camera.right), dot(p, camera.up), dot(p, camera.toward)};
    for (std::size_t a = 0; a < 3; ++a) {
      low[a] = std::min(low[a], seen[a]);
      high[a] = std::max(high[a], seen[a]);
    }
  }
  const Vec3 middle = 0.5 * (low + high);
  camera.centre_mm = middle[0] * camera.right + middle[1] * camera.up + middle[2] * camera.toward;
  const double wide = high[0] - low[0], tall = high[1] - low[1];
  camera.px_per_mm = std::min(wide > 0 ? (width - 2 * margin_px) / wide : far,
                              tall > 0 ? (height - 2 * margin_px) / tall : far);
  if (!std::isfinite(camera.px_per_mm)) camera.px_per_mm = 1;
  return camera;
}

bool SceneRender::hides(const Vec3& mm, double tolerance_mm) const {
  const Vec3 p = fine_.project(mm);
  if (!(p[0] >= 0 && p[0] < fine_.width && p[1] >= 0 && p[1] < fine_.height)) return false;
  const std::size_t at =
      static_cast<std::size_t>(p[1]) * static_cast<std::size_t>(fine_.width) + static_cast<std::size_t>(p[0]);
  return static_cast<double>(height_[at]) > p[2] + tolerance_mm;
}

SceneRender::SceneRender(const Camera& camera, const Rgb& background)
    : camera_(camera), fine_(camera), background_(background) {
  fine_.width *= oversampling;
  fine_.height *= oversampling;
  fine_.px_per_mm *= oversampling;
  const std::size_t count = static_cast<std::size_t>(fine_.width) * static_cast<std::size_t>(fine_.height);
  height_.assign(count, -std::numeric_limits<float>::infinity());
  colour_.assign(count, {0, 0, 0});
  clear_.assign(count, 1.0f);
}

std::vector<SceneRender::Vertex> SceneRender::transform(const TriangleMesh& mesh) const {
  const auto normals = vertex_normals(mesh);
  std::vector<Vertex> out(mesh.vertices_mm.size());
  for (std::size_t i = 0; i < out.size(); ++i) {
    const auto& v = mesh.vertices_mm[i];
    const Vec3 p = fine_.project({v[0], v[1], v[2]});
    const auto& n = normals[i];
    out[i].x = std::llround(p[0] * subpixels);
    out[i].y = std::llround(p[1] * subpixels);
    out[i].height = static_cast<float>(p[2]);
    out[i].facing =
        static_cast<float>(n[0] * fine_.toward[0] + n[1] * fine_.toward[1] + n[2] * fine_.toward[2]);
    out[i].carried = {n[0], n[1], n[2]};
  }
  return out;
}

// Pixel centres that the triangle covers, each shared edge on one side only, whichever way the triangle
// turns.
template <class Put>
void SceneRender::rasterise(const Vertex& a, const Vertex& b_in, const Vertex& c_in, Put&& put) const {
  const auto cross2 = [](const Vertex& p, const Vertex& q, std::int64_t x, std::int64_t y) {
    return (q.x - p.x) * (y - p.y) - (q.y - p.y) * (x - p.x);
  };
  const bool flip = cross2(a, b_in, c_in.x, c_in.y) < 0;
  const Vertex &b = flip ? c_in : b_in, &c = flip ? b_in : c_in;
  const std::int64_t area = cross2(a, b, c.x, c.y);
  if (area == 0) return;
  const auto owned = [](const Vertex& p, const Vertex& q) {
    return q.y > p.y || (q.y == p.y && q.x < p.x) ? 0 : -1;
  };
  const std::int64_t bias_a = owned(b, c), bias_b = owned(c, a), bias_c = owned(a, b);
  constexpr std::int64_t one = static_cast<std::int64_t>(subpixels), half = one / 2;
  const auto first = [](std::int64_t low) { return std::max<std::int64_t>(0, (low - half + one - 1) >> 8); };
  const std::int64_t x0 = first(std::min({a.x, b.x, c.x})), y0 = first(std::min({a.y, b.y, c.y}));
  const std::int64_t x1 = std::min<std::int64_t>(fine_.width - 1, (std::max({a.x, b.x, c.x}) - half) >> 8);
  const std::int64_t y1 = std::min<std::int64_t>(fine_.height - 1, (std::max({a.y, b.y, c.y}) - half) >> 8);
  for (std::int64_t y = y0; y <= y1; ++y) {
    for (std::int64_t x = x0; x <= x1; ++x) {
      const std::int64_t px = x * one + half, py = y * one + half;
      const std::int64_t wa = cross2(b, c, px, py), wb = cross2(c, a, px, py), wc = cross2(a, b, px, py);
      if (wa + bias_a < 0 || wb + bias_b < 0 || wc + bias_c < 0) continue;
      const float inverse = 1.0f / static_cast<float>(area);
      const float sa = static_cast<float>(wa) * inverse, sb = static_cast<float>(wb) * inverse,
                  sc = 1 - sa - sb;
      put(static_cast<std::size_t>(y * fine_.width + x), a, b, c, std::array<float, 3>{sa, sb, sc});
    }
  }
}

void SceneRender::draw_solid(const TriangleMesh& mesh, std::vector<Vertex>& vertices) {
  const auto put = [&](std::size_t at, const Vertex& a, const Vertex& b, const Vertex& c,
                       const std::array<float, 3>& s) {
    const float h = s[0] * a.height + s[1] * b.height + s[2] * c.height;
    if (h <= height_[at]) return;
    height_[at] = h;
    for (std::size_t k = 0; k < 3; ++k)
      colour_[at][k] = s[0] * a.carried[k] + s[1] * b.carried[k] + s[2] * c.carried[k];
  };
  for (const auto& t : mesh.triangles) rasterise(vertices[t[0]], vertices[t[1]], vertices[t[2]], put);
}

void SceneRender::add_solid(const TriangleMesh& mesh, const std::vector<Rgb>& colours) {
  // Light from the viewer's upper left.
  Vec3 light = fine_.toward + 0.6 * fine_.up - 0.5 * fine_.right;
  light = 1 / length(light) * light;
  std::vector<Vertex> vertices = transform(mesh);
  for (std::size_t i = 0; i < vertices.size(); ++i) {
    auto& n = vertices[i].carried;
    const float lambert = static_cast<float>(n[0] * light[0] + n[1] * light[1] + n[2] * light[2]);
    const float shade = ambient + (1 - ambient) * std::max(0.0f, lambert);
    const Rgb& colour = colours[colours.size() == 1 ? 0 : i];
    for (std::size_t k = 0; k < 3; ++k) n[k] = shade * static_cast<float>(colour[k]);
  }
  draw_solid(mesh, vertices);
}

void SceneRender::add_solid(const TriangleMesh& mesh, const Rgb& colour) {
  add_solid(mesh, std::vector<Rgb>{colour});
}

void SceneRender::add_glass(const TriangleMesh& mesh) {
  const std::vector<Vertex> vertices = transform(mesh);
  const auto put = [&](std::size_t at, const Vertex& a, const Vertex& b, const Vertex& c,
                       const std::array<float, 3>& s) {
    const float facing = std::abs(s[0] * a.facing + s[1] * b.facing + s[2] * c.facing);
    const float grazing = 1 - std::min(1.0f, facing);
    clear_[at] *= 1 - (glass_square_on + (glass_grazing - glass_square_on) * grazing * grazing * grazing);
  };
  for (const auto& t : mesh.triangles) rasterise(vertices[t[0]], vertices[t[1]], vertices[t[2]], put);
}

std::vector<std::uint8_t> SceneRender::pixels() const {
  std::vector<std::uint8_t> out;
  out.reserve(static_cast<std::size_t>(camera_.width) * static_cast<std::size_t>(camera_.height) * 3);
  constexpr float share = 1.0f / (oversampling * oversampling);
  for (int y = 0; y < camera_.height; ++y) {
    for (int x = 0; x < camera_.width; ++x) {
      std::array<float, 3> sum{0, 0, 0};
      for (int j = 0; j < oversampling; ++j) {
        for (int i = 0; i < oversampling; ++i) {
          const std::size_t at =
              static_cast<std::size_t>(y * oversampling + j) * static_cast<std::size_t>(fine_.width) +
              static_cast<std::size_t>(x * oversampling + i);
          const bool solid = height_[at] > -std::numeric_limits<float>::infinity();
          const float glass = (1 - clear_[at]) * (solid ? veil : 1.0f);
          for (std::size_t k = 0; k < 3; ++k) {
            const float base = solid ? colour_[at][k] : static_cast<float>(background_[k]);
            sum[k] += base + glass * (static_cast<float>(glass_colour[k]) - base);
          }
        }
      }
      for (const float s : sum)
        out.push_back(static_cast<std::uint8_t>(std::lround(std::clamp(s * share, 0.0f, 255.0f))));
    }
  }
  return out;
}

}  // namespace halfmark
