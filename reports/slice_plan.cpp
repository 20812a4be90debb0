#include "reports/slice_plan.h"

#include <algorithm>
#include <cmath>
#include <limits>

namespace halfmark {

namespace {

// The window is four times a small place's extent, so that its neighbourhood is seen; a large place needs
// less. It never has fewer voxels than a picture needs to be read as one.
constexpr double window_per_extent = 4, window_per_large_extent = 2, window_beside_large_voxels = 24;
constexpr double window_per_section = 1.25;
constexpr double least_window_voxels = 28;
// The frame leaves a little air around the place and is never too small to be seen.
constexpr double frame_per_extent = 1.3, least_frame_voxels = 4;
constexpr std::int64_t most_detail_samples = 1000, most_overview_samples = 560;
constexpr double almost_whole = 0.8;

const Pore* pore_of(const InspectionRun& run, std::int32_t id) {
  if (id <= 0) return nullptr;
  for (const Pore& pore : run.inspection.pores)
    if (pore.id == id) return &pore;
  return nullptr;
}

// Outward normal of the surface at the vertex nearest to the place.
std::optional<Vec3> normal_near(const TriangleMesh& mesh, const Vec3& place) {
  std::uint32_t nearest = 0;
  double least = std::numeric_limits<double>::infinity();
  for (std::uint32_t i = 0; i < mesh.vertices_mm.size(); ++i) {
    const auto& v = mesh.vertices_mm[i];
    const Vec3 d = Vec3{v[0], v[1], v[2]} - place;
    if (dot(d, d) < least) {
      least = dot(d, d);
      nearest = i;
    }
  }
  Vec3 normal{0, 0, 0};
  const auto corner = [&](std::uint32_t i) {
    const auto& v = mesh.vertices_mm[i];
    return Vec3{v[0], v[1], v[2]};
  };
  for (const auto& t : mesh.triangles)
    if (t[0] == nearest || t[1] == nearest || t[2] == nearest)
      normal = normal + cross(corner(t[1]) - corner(t[0]), corner(t[2]) - corner(t[0]));
  const double l = length(normal);
  if (!(l > 0)) return std::nullopt;
  return 1 / l * normal;
}

// The axis with the least of three lengths; z where they are alike, as its slices are quickest to read.
int least_axis(const Vec3& v) {
  constexpr double alike = 1.1;
  int axis = 2;
  for (const int a : {1, 0})
    if (v[static_cast<std::size_t>(a)] * alike < v[static_cast<std::size_t>(axis)]) axis = a;
  return axis;
}

int axis_for(const Pore* pore, const std::optional<Vec3>& wall_direction, const VolumeGeometry& g,
             const EvidencePlace& place) {
  if (place.section_axis >= 0) return place.section_axis;
  if (wall_direction) {
    const Vec3& d = *wall_direction;
    return least_axis({std::abs(d[0]), std::abs(d[1]), std::abs(d[2])});
  }
  if (!pore) return 2;
  Vec3 extent;
  for (std::size_t a = 0; a < 3; ++a)
    extent[a] = (pore->max_index[a] - pore->min_index[a] + 1) * g.spacing_mm[a];
  return least_axis(extent);
}

void set_step(SliceWindow& window, std::int64_t most) {
  const std::int64_t longest = std::max(window.end[0] - window.begin[0], window.end[1] - window.begin[1]);
  window.step = std::max<std::int64_t>(1, (longest + most - 1) / most);
}

SliceWindow whole_slice(const VolumeGeometry& g, int axis, std::int64_t index) {
  SliceWindow w;
  w.axis = axis;
  w.index = index;
  w.end = {g.size[static_cast<std::size_t>(w.u_axis())], g.size[static_cast<std::size_t>(w.v_axis())]};
  return w;
}

SliceWindow around(const SliceWindow& whole, const VolumeGeometry& g, const Vec3& index, double edge_mm) {
  SliceWindow w = whole;
  for (std::size_t k = 0; k < 2; ++k) {
    const auto axis = static_cast<std::size_t>(k == 0 ? w.u_axis() : w.v_axis());
    const std::int64_t size = g.size[axis];
    const auto edge =
        std::clamp<std::int64_t>(std::llround(std::min(edge_mm / g.spacing_mm[axis], 1e9)), 2, size);
    w.begin[k] = std::clamp<std::int64_t>(std::llround(index[axis] + 0.5) - edge / 2, 0, size - edge);
    w.end[k] = w.begin[k] + edge;
  }
  return w;
}

}  // namespace

SlicePlan plan_slice(const InspectionRun& run, const VolumeGeometry& g, const EvidencePlace& place) {
  SlicePlan plan;
  const Vec3 mm = *place.evidence.position_mm;
  const Pore* pore = pore_of(run, place.evidence.pore_id);
  plan.index = g.mm_to_index(mm);
  for (std::size_t a = 0; a < 3; ++a) {
    if (!std::isfinite(plan.index[a])) plan.index[a] = 0;
    plan.index[a] = std::clamp(plan.index[a], 0.0, static_cast<double>(g.size[a] - 1));
  }
  double extent = std::isfinite(place.evidence.extent_mm) ? std::max(0.0, place.evidence.extent_mm) : 0;
  std::optional<Vec3> wall_direction;  // along the voxel axes
  if (place.wall && place.wall_mm > 0) {
    extent = std::max(place.wall_mm, 0.0);
    if (const auto normal = normal_near(run.outer_surface, mm)) {
      plan.wall_index = g.mm_to_index(mm - place.wall_mm * *normal);
      wall_direction = *plan.wall_index - plan.index;
      plan.wall_from_index = plan.index;
      plan.index =
          0.5 * (plan.index + *plan.wall_index);  // the middle of the wall is the middle of the picture
      for (std::size_t a = 0; a < 3; ++a)
        plan.index[a] = std::clamp(plan.index[a], 0.0, static_cast<double>(g.size[a] - 1));
    }
  }
  if (pore && place.section_axis < 0) extent = std::max(extent, pore->length_mm);
  const double frame = std::max(frame_per_extent * extent, least_frame_voxels * g.voxel_mm());
  plan.half_mm = {frame / 2, frame / 2, frame / 2};
  const int axis = axis_for(pore, wall_direction, g, place);
  const auto index = std::clamp<std::int64_t>(std::llround(plan.index[static_cast<std::size_t>(axis)]), 0,
                                              g.size[static_cast<std::size_t>(axis)] - 1);
  plan.overview = whole_slice(g, axis, index);
  const double window =
      place.section_axis >= 0
          ? window_per_section * extent
          : std::min(window_per_extent * extent,
                     window_per_large_extent * extent + window_beside_large_voxels * g.voxel_mm());
  // A section without a window of its own has no extent: it is shown whole.
  const bool whole = place.section_axis >= 0 && extent <= 0;
  plan.detail =
      whole ? plan.overview
            : around(plan.overview, g, plan.index, std::max(window, least_window_voxels * g.voxel_mm()));
  const double area = static_cast<double>(plan.detail.width() * plan.detail.height());
  plan.has_overview =
      area < almost_whole * static_cast<double>(plan.overview.width() * plan.overview.height());
  set_step(plan.detail, most_detail_samples);
  set_step(plan.overview, most_overview_samples);
  return plan;
}

}  // namespace halfmark
