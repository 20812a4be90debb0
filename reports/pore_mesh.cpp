#include "reports/pore_mesh.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <span>

namespace halfmark {

namespace {

// Relaxation: enough to take the steps off. What it takes from the volume is given back by scaling.
constexpr int relaxation_rounds = 3;
constexpr float relaxation_share = 0.5f;
constexpr float cell_half_width = 0.5f;  // a corner stays in its cell

constexpr std::uint32_t none = std::numeric_limits<std::uint32_t>::max();

// Surface nets, one layer of cells after another. Local voxel (0,0,0) is the bounding box's first less one.
class Nets {
 public:
  Nets(std::int64_t nx, std::int64_t ny)
      : nx_(nx),
        ny_(ny),
        below_(plane(), 0),
        above_(plane(), 0),
        lower_(plane(), none),
        upper_(plane(), none) {}

  std::vector<std::uint8_t>& above() { return above_; }  // fill with plane z + 1, then call layer(z)
  void layer(std::int64_t z) {
    std::fill(upper_.begin(), upper_.end(), none);
    make_corners(z);
    join_columns();
    if (z > 0) join_plane();
    below_.swap(above_);
    lower_.swap(upper_);
  }

  std::vector<std::array<float, 3>> corners;        // each in the middle of its cell
  std::vector<std::array<std::uint32_t, 4>> quads;  // seen from the outside counter-clockwise

 private:
  std::size_t plane() const { return static_cast<std::size_t>(nx_ * ny_); }
  std::size_t at(std::int64_t x, std::int64_t y) const { return static_cast<std::size_t>(y * nx_ + x); }

  void make_corners(std::int64_t z) {
    for (std::int64_t y = 0; y + 1 < ny_; ++y) {
      for (std::int64_t x = 0; x + 1 < nx_; ++x) {
        const std::array<std::uint8_t, 8> in{
            below_[at(x, y)], below_[at(x + 1, y)], below_[at(x, y + 1)], below_[at(x + 1, y + 1)],
            above_[at(x, y)], above_[at(x + 1, y)], above_[at(x, y + 1)], above_[at(x + 1, y + 1)]};
        const int count = in[0] + in[1] + in[2] + in[3] + in[4] + in[5] + in[6] + in[7];
        if (count == 0 || count == 8) continue;
        upper_[at(x, y)] = static_cast<std::uint32_t>(corners.size());
        corners.push_back(
            {static_cast<float>(x) + 0.5f, static_cast<float>(y) + 0.5f, static_cast<float>(z) + 0.5f});
      }
    }
  }
  // a, b, c, d turn counter-clockwise seen from the far end of the voxel edge; `leaving`: the near end is
  // inside.
  void quad(std::uint32_t a, std::uint32_t b, std::uint32_t c, std::uint32_t d, bool leaving) {
    quads.push_back(leaving ? std::array{a, b, c, d} : std::array{a, d, c, b});
  }
  void join_columns() {  // edges along z between the planes below and above
    for (std::int64_t y = 1; y < ny_; ++y)
      for (std::int64_t x = 1; x < nx_; ++x)
        if (below_[at(x, y)] != above_[at(x, y)])
          quad(upper_[at(x - 1, y - 1)], upper_[at(x, y - 1)], upper_[at(x, y)], upper_[at(x - 1, y)],
               below_[at(x, y)] != 0);
  }
  void join_plane() {  // edges along x and y within the plane below, between the two layers of cells
    for (std::int64_t y = 0; y < ny_; ++y) {
      for (std::int64_t x = 0; x < nx_; ++x) {
        const bool here = below_[at(x, y)] != 0;
        if (y > 0 && x + 1 < nx_ && here != (below_[at(x + 1, y)] != 0))
          quad(lower_[at(x, y - 1)], lower_[at(x, y)], upper_[at(x, y)], upper_[at(x, y - 1)], here);
        if (x > 0 && y + 1 < ny_ && here != (below_[at(x, y + 1)] != 0))
          quad(lower_[at(x - 1, y)], upper_[at(x - 1, y)], upper_[at(x, y)], lower_[at(x, y)], here);
      }
    }
  }

  std::int64_t nx_, ny_;
  std::vector<std::uint8_t> below_, above_;
  std::vector<std::uint32_t> lower_, upper_;  // corner of the cell whose first voxel is (x, y)
};

void relax(Nets& nets) {
  const std::vector<std::array<float, 3>> cells = nets.corners;
  std::vector<std::array<float, 4>> sums(nets.corners.size());
  for (int round = 0; round < relaxation_rounds; ++round) {
    std::fill(sums.begin(), sums.end(), std::array<float, 4>{0, 0, 0, 0});
    for (const auto& q : nets.quads) {
      for (std::size_t i = 0; i < 4; ++i) {
        for (const std::uint32_t neighbour : {q[(i + 1) % 4], q[(i + 3) % 4]}) {
          for (std::size_t k = 0; k < 3; ++k) sums[q[i]][k] += nets.corners[neighbour][k];
          sums[q[i]][3] += 1;
        }
      }
    }
    for (std::size_t i = 0; i < sums.size(); ++i) {
      for (std::size_t k = 0; k < 3; ++k) {
        float& c = nets.corners[i][k];
        c += relaxation_share * (sums[i][k] / sums[i][3] - c);
        c = std::clamp(c, cells[i][k] - cell_half_width, cells[i][k] + cell_half_width);
      }
    }
  }
}

// Scales about the mean corner so that the mesh holds as much as its voxels.
void give_volume_back(Nets& nets, double voxels) {
  Vec3 centre{0, 0, 0};
  const auto corner = [&](std::uint32_t i) {
    return Vec3{nets.corners[i][0], nets.corners[i][1], nets.corners[i][2]};
  };
  for (std::uint32_t i = 0; i < nets.corners.size(); ++i) centre = centre + corner(i);
  centre = 1.0 / static_cast<double>(nets.corners.size()) * centre;
  double volume = 0;
  for (const auto& q : nets.quads) {
    const Vec3 a = corner(q[0]) - centre, b = corner(q[1]) - centre, c = corner(q[2]) - centre,
               d = corner(q[3]) - centre;
    volume += (dot(a, cross(b, c)) + dot(a, cross(c, d))) / 6;
  }
  if (!(volume > 0)) return;
  const double scale = std::cbrt(voxels / volume);
  for (auto& c : nets.corners)
    for (std::size_t k = 0; k < 3; ++k) c[k] = static_cast<float>(centre[k] + scale * (c[k] - centre[k]));
}

bool is_mirrored(const VolumeGeometry& g) {
  const auto& d = g.direction;
  return dot(cross({d[0], d[3], d[6]}, {d[1], d[4], d[7]}), {d[2], d[5], d[8]}) < 0;
}

TriangleMesh triangles_of(const Nets& nets, const VolumeGeometry& geometry,
                          const std::array<double, 3>& first) {
  TriangleMesh mesh;
  mesh.vertices_mm.reserve(nets.corners.size());
  for (const auto& c : nets.corners) {
    const Vec3 mm = geometry.index_to_mm({first[0] + c[0], first[1] + c[1], first[2] + c[2]});
    mesh.vertices_mm.push_back(
        {static_cast<float>(mm[0]), static_cast<float>(mm[1]), static_cast<float>(mm[2])});
  }
  const bool mirrored = is_mirrored(geometry);
  for (auto q : nets.quads) {
    if (mirrored) std::swap(q[1], q[3]);
    mesh.triangles.push_back({q[0], q[1], q[2]});
    mesh.triangles.push_back({q[0], q[2], q[3]});
  }
  return mesh;
}

}  // namespace

PoreMesher::PoreMesher(const RunLabels& labels, const VolumeGeometry& geometry) : geometry_(geometry) {
  if (labels.empty()) return;
  pieces_.reserve(labels.runs().size());
  for (std::int64_t z = 0; z < labels.size()[2]; ++z)
    for (std::int64_t y = 0; y < labels.size()[1]; ++y)
      for (const LabelRun& run : labels.row(y, z))
        pieces_.push_back(
            {run.label, run.begin, run.end, static_cast<std::int32_t>(y), static_cast<std::int32_t>(z)});
  std::stable_sort(pieces_.begin(), pieces_.end(),
                   [](const Piece& a, const Piece& b) { return a.label < b.label; });
}

TriangleMesh PoreMesher::mesh_of(std::int32_t label) const {
  const auto from = std::lower_bound(pieces_.begin(), pieces_.end(), label,
                                     [](const Piece& p, std::int32_t l) { return p.label < l; });
  const auto to = std::upper_bound(from, pieces_.end(), label,
                                   [](std::int32_t l, const Piece& p) { return l < p.label; });
  if (from == to) return {};
  std::int32_t x0 = from->x_begin, x1 = from->x_end, y0 = from->y, y1 = from->y;
  for (auto p = from; p != to; ++p) {
    x0 = std::min(x0, p->x_begin);
    x1 = std::max(x1, p->x_end);
    y0 = std::min(y0, p->y);
    y1 = std::max(y1, p->y);
  }
  const std::int32_t z0 = from->z, z1 = (to - 1)->z;
  Nets nets(x1 - x0 + 2, y1 - y0 + 3);
  auto next = from;
  double voxels = 0;
  for (std::int32_t z = z0 - 1; z <= z1; ++z) {
    std::fill(nets.above().begin(), nets.above().end(), std::uint8_t{0});
    for (; next != to && next->z == z + 1; ++next) {
      voxels += next->x_end - next->x_begin;
      const auto row = nets.above().begin() + std::int64_t{next->y - y0 + 1} * (x1 - x0 + 2);
      std::fill(row + (next->x_begin - x0 + 1), row + (next->x_end - x0 + 1), std::uint8_t{1});
    }
    nets.layer(z - (z0 - 1));
  }
  relax(nets);
  give_volume_back(nets, voxels);
  return triangles_of(nets, geometry_, {x0 - 1.0, y0 - 1.0, z0 - 1.0});
}

void append(TriangleMesh& mesh, const TriangleMesh& more) {
  const auto shift = static_cast<std::uint32_t>(mesh.vertices_mm.size());
  mesh.vertices_mm.insert(mesh.vertices_mm.end(), more.vertices_mm.begin(), more.vertices_mm.end());
  for (const auto& t : more.triangles) mesh.triangles.push_back({t[0] + shift, t[1] + shift, t[2] + shift});
}

}  // namespace halfmark
