// How a wall is measured
//
// The thickness at a place of the surface is the diameter of the largest sphere inside the material that
// touches the surface there (Hildebrand & Rueegsegger, J. Microscopy 185 (1997) 67: the largest sphere that
// covers the place; one that covers a place of the surface touches it). It is found by shrinking a sphere
// that touches from inside until no other surface point lies in it (Ma, Bae & Choi, Visual Computer 28 (2012)
// 7).
//
// Noise. Spheres are stopped by the surface's highest bumps, so that rough surfaces read thin, and a wall
// taken as the largest of many spheres reads thick. Hence three measures: the vertices pass a low-pass
// filter; points that would touch less than 75 degrees from the first touch are no second side; and the final
// radius is that of the sphere between the tangent planes at both touches, not that of the sphere stopped by
// a point.
//
// Wall or not: the directions from the centre to the two touches are at least 120 degrees apart. A sphere
// stopped by the flank of an edge (90 degrees) is a wall all the same if its far pole lies close to the
// surface: in a rod it touches all round, and the flank may come first by noise. It is then measured to the
// far side.
#include "analysis/wall_thickness.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <cmath>
#include <numbers>

#include "analysis/mesh_smoothing.h"
#include "analysis/point_tree.h"

namespace halfmark {

namespace {

constexpr int smoothing_pairs = 15;
// Normals are noisier than places: seen on a rod at contrast-to-noise 15, 4 degrees without, 2 with.
constexpr int normal_passes = 3;
// Noise left at a vertex by the smoothing, as a share of a single edge vertex's (seen on planes: see tests).
constexpr double noise_left_by_smoothing = 0.4;
// The sphere may hold points this little inside it: what smoothing leaves of noise bumps near the touch.
constexpr double bump_tolerance_voxels = 0.1;
// A second touch lies at least 75 degrees from the first: 2 sin(75 / 2). Nearer ones mostly tell of a noisy
// normal; the flank of a right-angled edge lies 90 degrees off.
constexpr float least_chord_in_radii = 1.2175F;
constexpr float wall_cosine = -0.5F;  // 120 degrees
// How close the far pole of a sphere that was stopped by a flank lies to the far side of a wall. The flanks
// of a rod stop it early by twice the bumps' height and by the normal's error.
constexpr double pole_tolerance_voxels = 1.25;
constexpr float pole_tolerance_in_radii = 0.25F;
constexpr int most_steps = 60;  // seen: up to 12
constexpr int plane_refinements = 3;
// Vertices this close to or beyond the outermost voxel centres' faces are caps of the field, not surface.
constexpr double cap_voxels = 0.25;
// Worst ripple of one face by its place between the voxels (seen on noise-free tilted plates): 0.02 voxel, as
// a uniform distribution.
constexpr double digitisation_voxels = 0.02 / std::numbers::sqrt3;
constexpr float first_guess_voxels = 4, guess_over_neighbour = 1.2F;
constexpr std::size_t block = 1024;

using P = std::array<float, 3>;
P operator-(const P& a, const P& b) { return {a[0] - b[0], a[1] - b[1], a[2] - b[2]}; }
P along(const P& p, const P& direction, float step) {
  return {p[0] + step * direction[0], p[1] + step * direction[1], p[2] + step * direction[2]};
}
float dot(const P& a, const P& b) { return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]; }

struct Sphere {
  float radius = 0;
  std::uint32_t touch = PointTree::none;  // none: at the cap
  bool wall = false;
};

class SphereSearch {
 public:
  SphereSearch(const Points& points, const Points& normals, const PointTree& tree, double voxel_mm,
               double max_mm)
      : points_(points),
        normals_(normals),
        tree_(tree),
        cap_radius_(static_cast<float>(0.5 * max_mm)),
        bump_(static_cast<float>(bump_tolerance_voxels * voxel_mm)),
        pole_(static_cast<float>(pole_tolerance_voxels * voxel_mm)) {}

  // guess: a likely radius; it changes nothing but the time.
  Sphere at(std::uint32_t vertex, float guess) const {
    const P &p = points_[vertex], &n = normals_[vertex];
    Sphere sphere = shrunk(p, n, guess);
    if (sphere.touch == PointTree::none) {
      sphere.wall = true;
      return sphere;
    }
    if (dot(n, normals_[sphere.touch]) > wall_cosine) {
      const std::uint32_t far = tree_.nearest(along(p, n, -2 * sphere.radius),
                                              std::max(pole_, pole_tolerance_in_radii * sphere.radius));
      if (far == PointTree::none || dot(n, normals_[far]) > wall_cosine) return sphere;
      sphere.touch = far;
    }
    refine(p, n, sphere);
    sphere.wall = dot(n, normals_[sphere.touch]) <= wall_cosine;
    return sphere;
  }

 private:
  // The sphere through p with its centre on the inward normal that holds no point but those near p. Spheres
  // that touch at p lie within each other: doubling `guess` until a point lies inside finds where to shrink
  // from.
  Sphere shrunk(const P& p, const P& n, float guess) const {
    Sphere sphere;
    sphere.radius = std::min(guess, cap_radius_);
    for (int i = 0; i < most_steps; ++i) {
      float touching_radius = 0;
      const std::uint32_t q = point_inside(p, n, sphere.radius, touching_radius);
      if (q != PointTree::none) {
        sphere.touch = q;
        sphere.radius = std::min(sphere.radius, touching_radius);
      } else if (sphere.touch != PointTree::none || sphere.radius >= cap_radius_) {
        break;
      } else {
        sphere.radius = std::min(2 * sphere.radius, cap_radius_);
      }
    }
    return sphere;
  }

  // The point nearest to the centre of those inside, and the radius at which the sphere touches it.
  std::uint32_t point_inside(const P& p, const P& n, float radius, float& touching_radius) const {
    return tree_.nearest(along(p, n, -radius), radius - bump_, [&](std::uint32_t candidate, float) {
      const P chord = p - points_[candidate];
      const float length2 = dot(chord, chord), height = dot(n, chord);
      if (!(height > 0)) return false;
      const float touching = length2 / (2 * height);
      if (length2 < least_chord_in_radii * least_chord_in_radii * touching * touching) return false;
      touching_radius = touching;
      return true;
    });
  }

  // The sphere between the tangent planes at p and at the second touch, which moves to where it touches.
  void refine(const P& p, const P& n, Sphere& sphere) const {
    for (int i = 0; i < plane_refinements; ++i) {
      const P& m = normals_[sphere.touch];
      const float opening = 1 - dot(n, m);
      if (opening < 1) return;  // less than 90 degrees apart: planes say little
      const float radius = dot(points_[sphere.touch] - p, m) / opening;
      if (!(radius > 0)) return;
      sphere.radius = radius;
      const P foot = along(along(p, n, -radius), m, radius);
      const P from_foot = points_[sphere.touch] - foot;
      const std::uint32_t next = tree_.nearest(foot, std::sqrt(dot(from_foot, from_foot)));
      if (next == PointTree::none || next == sphere.touch) return;
      if (dot(n, normals_[next]) > wall_cosine) return;
      sphere.touch = next;
    }
  }

  const Points& points_;
  const Points& normals_;
  const PointTree& tree_;
  float cap_radius_, bump_, pole_;
};

// Flat caps at the field's border are no surface.
std::vector<std::uint32_t> surface_vertices(const TriangleMesh& mesh, const Points& normals,
                                            const VolumeGeometry& geometry, bool cut) {
  std::vector<std::uint32_t> out;
  out.reserve(mesh.vertices_mm.size());
  for (std::uint32_t v = 0; v < mesh.vertices_mm.size(); ++v) {
    if (dot(normals[v], normals[v]) < 0.5F) continue;
    if (cut) {
      const auto& p = mesh.vertices_mm[v];
      const Vec3 index = geometry.mm_to_index({p[0], p[1], p[2]});
      bool cap = false;
      for (std::size_t a = 0; a < 3; ++a) {
        cap = cap || index[a] < -cap_voxels ||
              index[a] > static_cast<double>(geometry.size[a] - 1) + cap_voxels;
      }
      if (cap) continue;
    }
    out.push_back(v);
  }
  return out;
}

// Each wall vertex takes the median of itself and its neighbours on walls: a vertex of a noise bump may have
// any normal, and then its sphere is a stray.
void replace_by_medians(WallMap& map, const VertexNeighbours& neighbours) {
  const std::vector<float> measured = map.thickness_mm;
  const std::vector<std::uint8_t> wall = map.is_wall;
  tbb::parallel_for(std::size_t{0}, (measured.size() + block - 1) / block, [&](std::size_t b) {
    std::vector<float> near;
    for (std::size_t v = b * block; v < std::min((b + 1) * block, measured.size()); ++v) {
      if (wall[v] == 0) continue;
      near.assign(1, measured[v]);
      for (const std::uint32_t n : neighbours.of(v)) {
        if (wall[n] != 0) near.push_back(measured[n]);
      }
      // A lone wall vertex among others that are none is no wall.
      if (2 * near.size() < neighbours.of(v).size() + 1) {
        map.is_wall[v] = 0;
        continue;
      }
      const auto middle = near.begin() + static_cast<std::ptrdiff_t>((near.size() - 1) / 2);
      std::nth_element(near.begin(), middle, near.end());
      float median = *middle;
      if (near.size() % 2 == 0) median = 0.5F * (median + *std::min_element(middle + 1, near.end()));
      map.thickness_mm[v] = median;
    }
  });
}

// Of one thickness: noise of both sides after smoothing; the threshold, which moves both sides towards each
// other or apart; interpolation.
std::vector<Contribution> contributions_of(const GreyLevels& levels, double voxel_mm) {
  const double contrast = std::abs(levels.contrast());
  if (!(contrast > 0)) return {};
  const double sigma = std::sqrt(levels.blur_voxel * levels.blur_voxel + 1.0 / 12);
  const double slope = contrast / (std::sqrt(2 * std::numbers::pi) * sigma);  // grey per voxel at the edge
  const double edge_noise = std::max(levels.material_noise, levels.air_noise) / slope;
  return {{"noise", voxel_mm * std::numbers::sqrt2 * noise_left_by_smoothing * edge_noise},
          {"threshold", voxel_mm * 2 * levels.threshold_standard_uncertainty / slope},
          {"interpolation", voxel_mm * std::numbers::sqrt2 * digitisation_voxels}};
}

double combined(const std::vector<Contribution>& contributions) {
  double squares = 0;
  for (const Contribution& c : contributions) squares += c.standard_uncertainty * c.standard_uncertainty;
  return std::sqrt(squares);
}

}  // namespace

WallMap measure_walls(const TriangleMesh& mesh, const VolumeGeometry& geometry, const PartMap& part,
                      const GreyLevels& levels, const WallSpec& options, const RunControl& control) {
  const std::size_t count = mesh.vertices_mm.size();
  WallMap map;
  map.thickness_mm.assign(count, 0);
  map.is_wall.assign(count, 0);
  map.at_cap.assign(count, 0);
  map.contributions = contributions_of(levels, geometry.voxel_mm());
  map.standard_uncertainty_mm = combined(map.contributions);
  control.step("walls", 0);
  if (count == 0) return map;

  const VertexNeighbours neighbours(mesh);
  const Points points = smoothed_vertices(mesh, neighbours, smoothing_pairs, control);
  const Points normals = averaged_normals(vertex_normals(points, mesh), neighbours, normal_passes);
  const std::vector<std::uint32_t> members = surface_vertices(mesh, normals, geometry, part.cut_by_field);
  const PointTree tree(points, members);
  control.step("walls", 0.2);
  const SphereSearch search(points, normals, tree, geometry.voxel_mm(), options.max_mm);
  tbb::parallel_for(std::size_t{0}, (members.size() + block - 1) / block, [&](std::size_t b) {
    if (control.cancelled()) return;
    float guess = static_cast<float>(first_guess_voxels * geometry.voxel_mm());
    for (std::size_t i = b * block; i < std::min((b + 1) * block, members.size()); ++i) {
      const std::uint32_t v = members[i];
      const Sphere sphere = search.at(v, guess);
      guess = guess_over_neighbour * sphere.radius;
      const double thickness = 2.0 * static_cast<double>(sphere.radius);
      map.at_cap[v] = sphere.touch == PointTree::none || thickness >= options.max_mm;
      map.thickness_mm[v] = static_cast<float>(std::min(thickness, options.max_mm));
      map.is_wall[v] = sphere.wall;
    }
  });
  control.throw_if_cancelled();
  replace_by_medians(map, neighbours);
  if (part.cut_by_field) {
    map.warnings.push_back(
        "the part is cut by the border of the field: walls there are judged by the sides that were seen");
  }
  control.step("walls", 1);
  return map;
}

}  // namespace halfmark
