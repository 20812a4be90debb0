#include "analysis/wall_patches.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <array>
#include <cmath>
#include <iterator>
#include <numbers>
#include <numeric>
#include <span>

#include "analysis/mesh_smoothing.h"

namespace halfmark {

namespace {

struct Room {
  double wall_share;  // least share of the patch that is wall
  double area_share;  // least share of its area left at the border of a zone or of the surface
};
constexpr Room enough{0.8, 0.5}, cramped{0.0, 0.0};
constexpr float same_side_cosine = 0.5F;
// Centres are first tried this share of the radius apart ...
constexpr double centre_step_in_radii = 1.0 / 3;
// ... and patches this close above the least mean are then tried at every vertex about them.
constexpr std::size_t refined_patches = 32;
constexpr std::size_t block = 64;

using P = std::array<float, 3>;

// Vertices sorted into cubes, so that the neighbourhood of a point is 27 cubes.
class Cubes {
 public:
  Cubes(const std::vector<P>& points, double edge) : points_(points), edge_(static_cast<float>(edge)) {
    if (points.empty()) return;
    low_ = points[0];
    P high = low_;
    for (const P& p : points) {
      for (std::size_t a = 0; a < 3; ++a) {
        low_[a] = std::min(low_[a], p[a]);
        high[a] = std::max(high[a], p[a]);
      }
    }
    // More cubes than this along an axis would only be empty ones.
    constexpr float most = 1000000;
    for (std::size_t a = 0; a < 3; ++a) edge_ = std::max(edge_, (high[a] - low_[a]) / most);
    keyed_.reserve(points.size());
    for (std::uint32_t v = 0; v < points.size(); ++v) keyed_.push_back({key(cube(points[v])), v});
    std::sort(keyed_.begin(), keyed_.end());
  }

  template <class F>
  void for_near(const P& p, F&& f) const {
    const auto c = cube(p);
    for (std::int64_t z = c[2] - 1; z <= c[2] + 1; ++z) {
      for (std::int64_t y = c[1] - 1; y <= c[1] + 1; ++y) {
        const std::uint64_t first = key({c[0] - 1, y, z}), last = key({c[0] + 1, y, z});
        auto it =
            std::lower_bound(keyed_.begin(), keyed_.end(), std::pair<std::uint64_t, std::uint32_t>{first, 0});
        for (; it != keyed_.end() && it->first <= last; ++it) f(it->second);
      }
    }
  }
  // The first vertex of each cube.
  std::vector<std::uint32_t> one_of_each() const {
    std::vector<std::uint32_t> out;
    for (std::size_t i = 0; i < keyed_.size(); ++i) {
      if (i == 0 || keyed_[i].first != keyed_[i - 1].first) out.push_back(keyed_[i].second);
    }
    return out;
  }

 private:
  using Cube = std::array<std::int64_t, 3>;
  Cube cube(const P& p) const {
    Cube c;
    for (std::size_t a = 0; a < 3; ++a) c[a] = 1 + static_cast<std::int64_t>((p[a] - low_[a]) / edge_);
    return c;
  }
  static std::uint64_t key(const Cube& c) {
    return static_cast<std::uint64_t>(c[2]) << 42 | static_cast<std::uint64_t>(c[1]) << 21 |
           static_cast<std::uint64_t>(c[0]);
  }
  const std::vector<P>& points_;
  float edge_;
  P low_{};
  std::vector<std::pair<std::uint64_t, std::uint32_t>> keyed_;
};

class PatchMeans {
 public:
  PatchMeans(const TriangleMesh& mesh, const WallMap& walls, const std::vector<float>& areas,
             const std::vector<std::uint8_t>& in_zone, double radius)
      : mesh_(mesh),
        walls_(walls),
        areas_(areas),
        in_zone_(in_zone),
        radius2_(static_cast<float>(radius * radius)),
        normals_(vertex_normals(mesh.vertices_mm, mesh)),
        cubes_(mesh.vertices_mm, radius) {}

  bool may_be_centre(std::uint32_t v) const {
    return walls_.is_wall[v] != 0 && (in_zone_.empty() || in_zone_[v] != 0);
  }

  // False if the patch does not count.
  bool mean(std::uint32_t centre, const Room& room, double& mean_mm) const {
    const P &p = mesh_.vertices_mm[centre], &n = normals_[centre];
    double all = 0, wall = 0, sum = 0;
    cubes_.for_near(p, [&](std::uint32_t v) {
      if (!in_patch(p, n, v)) return;
      if (!in_zone_.empty() && in_zone_[v] == 0) return;
      all += areas_[v];
      if (walls_.is_wall[v] == 0) return;
      wall += areas_[v];
      sum += static_cast<double>(areas_[v]) * static_cast<double>(walls_.thickness_mm[v]);
    });
    if (!(wall > 0) || wall < room.wall_share * all) return false;
    if (all < room.area_share * std::numbers::pi * static_cast<double>(radius2_) && all > areas_[centre])
      return false;
    mean_mm = sum / wall;
    return true;
  }

  std::vector<Patch> at(const std::vector<std::uint32_t>& centres, const Room& room) const {
    std::vector<Patch> patches(centres.size());
    std::vector<std::uint8_t> good(centres.size(), 0);
    tbb::parallel_for(std::size_t{0}, (centres.size() + block - 1) / block, [&](std::size_t b) {
      for (std::size_t i = b * block; i < std::min((b + 1) * block, centres.size()); ++i) {
        patches[i].centre = centres[i];
        good[i] = may_be_centre(centres[i]) && mean(centres[i], room, patches[i].mean_mm);
      }
    });
    std::size_t kept = 0;
    for (std::size_t i = 0; i < patches.size(); ++i) {
      if (good[i] != 0) patches[kept++] = patches[i];
    }
    patches.resize(kept);
    return patches;
  }

  // The vertices of the patch about `centre`.
  void add_members(std::uint32_t centre, std::vector<std::uint32_t>& out) const {
    const P &p = mesh_.vertices_mm[centre], &n = normals_[centre];
    cubes_.for_near(p, [&](std::uint32_t v) {
      if (in_patch(p, n, v)) out.push_back(v);
    });
  }

 private:
  bool in_patch(const P& p, const P& n, std::uint32_t v) const {
    const P& q = mesh_.vertices_mm[v];
    const P d{q[0] - p[0], q[1] - p[1], q[2] - p[2]};
    const P& m = normals_[v];
    return d[0] * d[0] + d[1] * d[1] + d[2] * d[2] <= radius2_ &&
           n[0] * m[0] + n[1] * m[1] + n[2] * m[2] > same_side_cosine;
  }

  const TriangleMesh& mesh_;
  const WallMap& walls_;
  const std::vector<float>& areas_;
  const std::vector<std::uint8_t>& in_zone_;
  float radius2_;
  Points normals_;
  Cubes cubes_;
};

void sort_unique(std::vector<std::uint32_t>& v) {
  std::sort(v.begin(), v.end());
  v.erase(std::unique(v.begin(), v.end()), v.end());
}

}  // namespace

std::vector<Patch> wall_patches(const TriangleMesh& mesh, const WallMap& walls,
                                const std::vector<float>& areas_mm2, const std::vector<std::uint8_t>& in_zone,
                                double patch_mm2, const std::vector<std::uint32_t>& also_at) {
  const double radius = std::sqrt(std::max(patch_mm2, 1e-12) / std::numbers::pi);
  const PatchMeans means(mesh, walls, areas_mm2, in_zone, radius);
  // Walls only, so that every cube with a wall vertex has one as its centre.
  std::vector<std::uint32_t> wall;
  std::vector<P> wall_points;
  for (std::uint32_t v = 0; v < mesh.vertices_mm.size(); ++v) {
    if (!means.may_be_centre(v)) continue;
    wall.push_back(v);
    wall_points.push_back(mesh.vertices_mm[v]);
  }
  std::vector<std::uint32_t> centres;
  for (const std::uint32_t i : Cubes(wall_points, centre_step_in_radii * radius).one_of_each())
    centres.push_back(wall[i]);
  centres.insert(centres.end(), also_at.begin(), also_at.end());
  sort_unique(centres);
  std::vector<Patch> patches = means.at(centres, enough);
  if (patches.empty()) return means.at(centres, cramped);

  std::vector<Patch> thin = patches;
  std::sort(thin.begin(), thin.end(), [](const Patch& a, const Patch& b) {
    return a.mean_mm < b.mean_mm || (a.mean_mm == b.mean_mm && a.centre < b.centre);
  });
  std::vector<std::uint32_t> more = centres;
  for (std::size_t i = 0; i < std::min(refined_patches, thin.size()); ++i)
    means.add_members(thin[i].centre, more);
  sort_unique(more);
  std::vector<std::uint32_t> added;
  std::set_difference(more.begin(), more.end(), centres.begin(), centres.end(), std::back_inserter(added));
  const std::vector<Patch> refined = means.at(added, enough);
  patches.insert(patches.end(), refined.begin(), refined.end());
  std::sort(patches.begin(), patches.end(),
            [](const Patch& a, const Patch& b) { return a.centre < b.centre; });
  return patches;
}

}  // namespace halfmark
