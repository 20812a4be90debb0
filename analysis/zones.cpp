#include "analysis/zones.h"

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <functional>
#include <map>

#include "analysis/mask_morphology.h"
#include "io/mesh_file.h"

namespace halfmark {

namespace {

struct Interval {
  double begin = 0, end = 0;  // along x, in voxels
};

// A row of voxel centres in mm: start at x = 0, step per voxel.
struct RowLine {
  Vec3 start, step;
};

RowLine row_line(const VolumeGeometry& g, std::int64_t y, std::int64_t z) {
  const Vec3 start = g.index_to_mm({0, static_cast<double>(y), static_cast<double>(z)});
  return {start, g.index_to_mm({1, static_cast<double>(y), static_cast<double>(z)}) - start};
}

constexpr double infinite = 1e300;

// Where low <= value + slope x <= high.
Interval between(double value, double slope, double low, double high) {
  if (std::abs(slope) < 1e-12)
    return value >= low && value <= high ? Interval{-infinite, infinite} : Interval{0, -1};
  const double a = (low - value) / slope, b = (high - value) / slope;
  return {std::min(a, b), std::max(a, b)};
}

Interval common(const Interval& a, const Interval& b) {
  return {std::max(a.begin, b.begin), std::min(a.end, b.end)};
}

// Where |p + x s|^2 <= r^2.
Interval within_radius(const Vec3& p, const Vec3& s, double radius) {
  const double a = dot(s, s), b = dot(p, s), c = dot(p, p) - radius * radius;
  if (a < 1e-18) return c <= 0 ? Interval{-infinite, infinite} : Interval{0, -1};
  const double d = b * b - a * c;
  if (d < 0) return {0, -1};
  const double root = std::sqrt(d);
  return {(-b - root) / a, (-b + root) / a};
}

Interval of_box(const ZoneSpec& zone, const RowLine& line) {
  Interval out{-infinite, infinite};
  for (std::size_t a = 0; a < 3; ++a)
    out = common(out, between(line.start[a], line.step[a], zone.min_mm[a], zone.max_mm[a]));
  return out;
}

Interval of_cylinder(const ZoneSpec& zone, const RowLine& line) {
  const Vec3 axis = zone.to_mm - zone.from_mm;
  const double span = length(axis);
  const Vec3 along = (1 / span) * axis, p = line.start - zone.from_mm;
  const double t = dot(p, along), ts = dot(line.step, along);
  return common(between(t, ts, 0, span),
                within_radius(p - t * along, line.step - ts * along, zone.radius_mm));
}

using Runs = std::vector<Run>;

void add_clipped(const Interval& i, std::int64_t width, Runs& out) {
  // Voxel centres within, with a hair of slack for limits that fall on a centre.
  const double begin = std::max(std::ceil(i.begin - 1e-9), 0.0),
               end = std::min(std::floor(i.end + 1e-9) + 1, static_cast<double>(width));
  if (begin < end) out.push_back({static_cast<std::int32_t>(begin), static_cast<std::int32_t>(end)});
}

Runs united(const Runs& a, const Runs& b) {
  Runs all = a, out;
  all.insert(all.end(), b.begin(), b.end());
  std::sort(all.begin(), all.end(), [](const Run& p, const Run& q) { return p.begin < q.begin; });
  for (const Run& run : all) {
    if (!out.empty() && run.begin <= out.back().end) {
      out.back().end = std::max(out.back().end, run.end);
    } else {
      out.push_back(run);
    }
  }
  return out;
}

Runs without(const Runs& a, const Runs& b) {
  Runs out;
  for (const Run& run : a) {
    std::int32_t at = run.begin;
    for (const Run& cut : b) {
      if (cut.end <= at || cut.begin >= run.end) continue;
      if (cut.begin > at) out.push_back({at, cut.begin});
      at = std::max(at, cut.end);
    }
    if (at < run.end) out.push_back({at, run.end});
  }
  return out;
}

std::string box_text(const Vec3& low, const Vec3& high) {
  char text[200];
  std::snprintf(text, sizeof text, "[%.4g, %.4g, %.4g] to [%.4g, %.4g, %.4g] mm", low[0], low[1], low[2],
                high[0], high[1], high[2]);
  return text;
}

void check_closed(const TriangleMesh& mesh, const std::string& place) {
  std::map<std::pair<std::uint32_t, std::uint32_t>, int> edges;
  for (const auto& t : mesh.triangles) {
    for (std::size_t i = 0; i < 3; ++i) {
      const std::uint32_t a = t[i], b = t[(i + 1) % 3];
      edges[{std::min(a, b), std::max(a, b)}] += a < b ? 1 : 1000;
    }
  }
  const auto open = std::count_if(edges.begin(), edges.end(), [](const auto& e) { return e.second != 1001; });
  if (open > 0)
    throw Problem(ExitStatus::bad_data, place + ": the mesh is not closed: " + std::to_string(open) +
                                            " edges do not join two triangles; repair it");
}

// Where the rows of voxels cross a mesh's surface.
class MeshRows {
 public:
  MeshRows(const TriangleMesh& mesh, const VolumeGeometry& g)
      : mesh_(mesh), rows_(g.size[1]), of_plane_(static_cast<std::size_t>(g.size[2])) {
    for (const auto& v : mesh.vertices_mm) {
      Vec3 p = g.mm_to_index({v[0], v[1], v[2]});
      // Rows that meet a corner exactly are moved aside by a hair, all alike, so that each crossing counts
      // once.
      p[1] -= 1.3e-7;
      p[2] -= 0.7e-7;
      at_.push_back(p);
    }
    for (std::uint32_t t = 0; t < mesh.triangles.size(); ++t) {
      const Span planes = span_of(t, 2, g.size[2]);
      for (std::int64_t z = planes.first; z <= planes.last; ++z)
        of_plane_[static_cast<std::size_t>(z)].push_back(t);
    }
  }

  // In voxels along x, sorted, by row of plane z.
  void plane(std::int64_t z, std::vector<std::vector<double>>& crossings) const {
    crossings.assign(static_cast<std::size_t>(rows_), {});
    for (const std::uint32_t t : of_plane_[static_cast<std::size_t>(z)]) {
      const Span rows = span_of(t, 1, rows_);
      for (std::int64_t y = rows.first; y <= rows.last; ++y) {
        Vec3 p[3];
        for (std::size_t i = 0; i < 3; ++i)
          p[i] = at_[mesh_.triangles[t][i]] - Vec3{0, static_cast<double>(y), static_cast<double>(z)};
        const auto side = [&](int i, int j) { return p[i][1] * p[j][2] - p[j][1] * p[i][2]; };
        const double a = side(1, 2), b = side(2, 0), c = side(0, 1);
        if (!((a > 0 && b > 0 && c > 0) || (a < 0 && b < 0 && c < 0))) continue;
        crossings[static_cast<std::size_t>(y)].push_back((a * p[0][0] + b * p[1][0] + c * p[2][0]) /
                                                         (a + b + c));
      }
    }
    for (auto& row : crossings) std::sort(row.begin(), row.end());
  }

 private:
  struct Span {
    std::int64_t first = 0, last = -1;
  };
  // The rows or planes within a triangle's reach along an axis.
  Span span_of(std::uint32_t triangle, std::size_t axis, std::int64_t size) const {
    const auto& t = mesh_.triangles[triangle];
    const auto [low, high] = std::minmax({at_[t[0]][axis], at_[t[1]][axis], at_[t[2]][axis]});
    const double last = static_cast<double>(size - 1);
    if (!(high >= 0) || !(low <= last)) return {};
    return {static_cast<std::int64_t>(std::ceil(std::max(low, 0.0))),
            static_cast<std::int64_t>(std::floor(std::min(high, last)))};
  }

  const TriangleMesh& mesh_;
  std::int64_t rows_;
  std::vector<Vec3> at_;                              // vertices, in voxels
  std::vector<std::vector<std::uint32_t>> of_plane_;  // triangles by plane
};

}  // namespace

struct ZoneSet::Detail {
  VolumeGeometry geometry;
  std::vector<ZoneSpec> zones;
  std::map<std::size_t, RunMask> masks;  // skin and mesh zones, by zone

  std::size_t find(const std::string& id) const {
    for (std::size_t i = 0; i < zones.size(); ++i) {
      if (zones[i].id == id) return i;
    }
    throw Problem(ExitStatus::bad_data, "zones: there is no zone '" + id + "'");
  }

  Runs row(std::size_t zone, std::int64_t y, std::int64_t z) const {
    const ZoneSpec& spec = zones[zone];
    const std::int64_t width = geometry.size[0];
    Runs out;
    switch (spec.shape) {
      case ZoneShape::everything:
        out.push_back({0, static_cast<std::int32_t>(width)});
        break;
      case ZoneShape::box:
        add_clipped(of_box(spec, row_line(geometry, y, z)), width, out);
        break;
      case ZoneShape::cylinder:
        add_clipped(of_cylinder(spec, row_line(geometry, y, z)), width, out);
        break;
      case ZoneShape::sphere: {
        const RowLine line = row_line(geometry, y, z);
        add_clipped(within_radius(line.start - spec.centre_mm, line.step, spec.radius_mm), width, out);
        break;
      }
      case ZoneShape::skin:
      case ZoneShape::mesh: {
        const auto runs = masks.at(zone).row(y, z);
        out.assign(runs.begin(), runs.end());
        break;
      }
      case ZoneShape::union_of:
        for (const std::string& id : spec.of) out = united(out, row(find(id), y, z));
        break;
      case ZoneShape::difference:
        out = row(find(spec.of.front()), y, z);
        for (std::size_t i = 1; i < spec.of.size(); ++i) out = without(out, row(find(spec.of[i]), y, z));
        break;
    }
    return out;
  }

  bool holds(std::size_t zone, const Vec3& mm) const {
    const Vec3 index = geometry.mm_to_index(mm);
    std::array<std::int64_t, 3> at;
    for (std::size_t a = 0; a < 3; ++a) at[a] = std::llround(index[a]);
    const ZoneSpec& spec = zones[zone];
    switch (spec.shape) {
      case ZoneShape::everything:
        return true;
      case ZoneShape::box:
        return std::equal(mm.begin(), mm.end(), spec.min_mm.begin(), std::greater_equal<>()) &&
               std::equal(mm.begin(), mm.end(), spec.max_mm.begin(), std::less_equal<>());
      case ZoneShape::cylinder: {
        const Vec3 axis = spec.to_mm - spec.from_mm, p = mm - spec.from_mm;
        const double t = dot(p, axis) / dot(axis, axis);
        return t >= 0 && t <= 1 && length(p - t * axis) <= spec.radius_mm;
      }
      case ZoneShape::sphere:
        return length(mm - spec.centre_mm) <= spec.radius_mm;
      case ZoneShape::skin:
      case ZoneShape::mesh:
        return halfmark::contains(masks.at(zone), at[0], at[1], at[2]);
      case ZoneShape::union_of:
        return std::any_of(spec.of.begin(), spec.of.end(),
                           [&](const std::string& id) { return holds(find(id), mm); });
      case ZoneShape::difference:
        break;
    }
    if (!holds(find(spec.of.front()), mm)) return false;
    return std::none_of(spec.of.begin() + 1, spec.of.end(),
                        [&](const std::string& id) { return holds(find(id), mm); });
  }
};

namespace {

RunMask mesh_mask(const ZoneSpec& zone, const VolumeGeometry& g, const RunControl& control) {
  const std::string place = "zones: " + zone.id;
  const TriangleMesh mesh = read_stl(zone.file);
  check_closed(mesh, place);
  const MeshRows rows(mesh, g);
  RunMask out(g.size);
  std::vector<std::vector<double>> crossings;
  for (std::int64_t z = 0; z < g.size[2]; ++z) {
    control.throw_if_cancelled();
    rows.plane(z, crossings);
    for (const std::vector<double>& at : crossings) {
      Runs runs;
      for (std::size_t i = 0; i + 1 < at.size(); i += 2) add_clipped({at[i], at[i + 1]}, g.size[0], runs);
      for (const Run& run : united(runs, {})) out.add_run(run);
      out.end_row();
    }
  }
  return out;
}

RunMask skin_mask(const ZoneSpec& zone, const VolumeGeometry& g, const PartMap& part,
                  const RunControl& control) {
  // Depths count from the face half a voxel outside the first voxel's centre.
  const double half = 0.5 * g.voxel_mm();
  const RunMask outer = zone.from_depth_mm > 0
                            ? erode(part.inside, zone.from_depth_mm + half, g.spacing_mm, true, control)
                            : part.inside;
  return difference(outer, erode(part.inside, zone.depth_mm + half, g.spacing_mm, true, control));
}

bool is_left_out(const ZoneSpec& zone) { return zone.use != ZoneUse::inspect; }

}  // namespace

ZoneSet::ZoneSet(const InspectionSpec& spec, const VolumeGeometry& geometry, const PartMap& part,
                 const RunControl& control)
    : detail_(std::make_unique<Detail>()) {
  detail_->geometry = geometry;
  detail_->zones = spec.zones;
  for (std::size_t i = 0; i < spec.zones.size(); ++i) {
    if (spec.zones[i].shape == ZoneShape::mesh)
      detail_->masks[i] = mesh_mask(spec.zones[i], geometry, control);
    if (spec.zones[i].shape == ZoneShape::skin)
      detail_->masks[i] = skin_mask(spec.zones[i], geometry, part, control);
  }
  Vec3 low{1e300, 1e300, 1e300}, high{-1e300, -1e300, -1e300};
  for (std::size_t corner = 0; corner < 8; ++corner) {
    Vec3 index;
    for (std::size_t a = 0; a < 3; ++a)
      index[a] = ((corner >> a) & 1) != 0 ? static_cast<double>(geometry.size[a]) - 0.5 : -0.5;
    const Vec3 mm = geometry.index_to_mm(index);
    for (std::size_t a = 0; a < 3; ++a) {
      low[a] = std::min(low[a], mm[a]);
      high[a] = std::max(high[a], mm[a]);
    }
  }
  for (std::size_t i = 0; i < spec.zones.size(); ++i) {
    bool any = false;
    for (std::int64_t z = 0; z < geometry.size[2] && !any; ++z) {
      control.throw_if_cancelled();
      for (std::int64_t y = 0; y < geometry.size[1] && !any; ++y) any = !detail_->row(i, y, z).empty();
    }
    if (!any) {
      throw Problem(ExitStatus::bad_data,
                    "zones: zone '" + spec.zones[i].id + "' holds no voxel of the volume, which spans " +
                        box_text(low, high) + "; check its position, its size and the volume's voxel size");
    }
  }
}

ZoneSet::~ZoneSet() = default;
std::size_t ZoneSet::count() const { return detail_->zones.size(); }
const ZoneSpec& ZoneSet::spec(std::size_t zone) const { return detail_->zones[zone]; }
std::size_t ZoneSet::index_of(const std::string& id) const { return detail_->find(id); }
bool ZoneSet::contains(std::size_t zone, const Vec3& mm) const { return detail_->holds(zone, mm); }

bool ZoneSet::left_out(const Vec3& mm) const {
  for (std::size_t i = 0; i < count(); ++i) {
    if (is_left_out(detail_->zones[i]) && detail_->holds(i, mm)) return true;
  }
  return false;
}

void ZoneSet::row_intervals(std::size_t zone, std::int64_t y, std::int64_t z, std::vector<Run>& out) const {
  out = detail_->row(zone, y, z);
  for (std::size_t i = 0; i < count() && !out.empty(); ++i) {
    if (i != zone && is_left_out(detail_->zones[i])) out = without(out, detail_->row(i, y, z));
  }
}

}  // namespace halfmark
