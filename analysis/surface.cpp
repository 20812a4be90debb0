// How the surface is found
//
// Which voxels are inside is known already, from the part map; the grey values only say where along the edge
// between an inside and an outside voxel the ISO-50 level is crossed (edge_crossing.h). So the inside is
// unpacked to bits, 64 voxels a word, plain words are passed over, and voxels are read at the surface alone.
// What is not inside counts as air whatever its grey value: debris leaves no trace; a filled pore none
// either. Where the two greys do not enclose the level (the mouth of a filled open pore) the vertex lies half
// way.
//
// The field's border. Beyond the field there is nothing. Closed: a voxel reaches half a voxel beyond its
// centre, so that the volume of a part that is cut off is that of its voxels in the field. At the faces of
// the volume the last voxels are continued to there and capped flat (along the edges of the volume that gives
// triangles without area); at the border of padding the cap is half way to the neighbour. Open: cells that
// reach beyond the field have no triangles.
//
// Each slab of planes numbers its vertices from 0 and continues the count into the first plane of the next
// slab, for the cells between the two; adding the slab's first number makes the numbers global.
#include "analysis/surface.h"

#include <tbb/parallel_for.h>

#include <algorithm>
#include <bit>
#include <cstring>
#include <limits>
#include <string>
#include <type_traits>

#include "analysis/edge_crossing.h"
#include "analysis/surface_cells.h"
#include "analysis/voxel_rows.h"

namespace halfmark {

namespace {

constexpr std::int64_t slab_planes = 8;
// Two planes beyond each face of the volume: the last voxels continued to their faces, then nothing.
constexpr std::int64_t cap_planes = 2;
// A vertex keeps this share of an edge from both voxel centres, so that no triangle shrinks to a point where
// a voxel has just the threshold's grey value.
constexpr double least_share = 1.0 / 1024;

using Word = std::uint64_t;
constexpr std::int64_t word_bits = 64;

// The grid of cells: the volume's voxels with `margin` planes added on every side.
struct Grid {
  const RunMask& inside;
  const FieldOfView& field;
  const VolumeGeometry& geometry;
  double threshold;
  EdgeCrossing crossing;
  bool open_at_padding;  // cells that reach out of the field of view are left out
  std::int64_t margin;
  std::array<std::int64_t, 3> size;  // with the margin
  std::int64_t words;                // of a row
  bool mirrored;                     // the direction matrix turns right-handed into left-handed

  std::int64_t voxel(std::size_t axis, std::int64_t i) const {
    return std::clamp<std::int64_t>(i - margin, 0, geometry.size[axis] - 1);
  }
  // Voxel index as a coordinate: the added planes lie at the faces of the outermost voxels.
  double coordinate(std::size_t axis, std::int64_t i) const {
    if (i < margin) return -0.5;
    if (i >= margin + geometry.size[axis]) return static_cast<double>(geometry.size[axis]) - 0.5;
    return static_cast<double>(i - margin);
  }
  bool beyond(std::size_t axis, std::int64_t i) const {
    return margin > 0 && (i == 0 || i == size[axis] - 1);
  }
};

bool reaches_faces(const RunMask& mask) {
  const auto& size = mask.size();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      const auto row = mask.row(y, z);
      if (row.empty()) continue;
      if (z == 0 || y == 0 || z + 1 == size[2] || y + 1 == size[1]) return true;
      if (row.front().begin == 0 || row.back().end == size[0]) return true;
    }
  }
  return false;
}

void set_bits(Word* row, std::int64_t begin, std::int64_t end) {
  while (begin < end) {
    const std::int64_t w = begin / word_bits, first = begin % word_bits;
    const std::int64_t last = std::min(word_bits, first + end - begin);
    const Word upper = last == word_bits ? ~Word{0} : (Word{1} << last) - 1;
    row[w] |= upper & ~((Word{1} << first) - 1);
    begin += last - first;
  }
}

// Planes of the grid as bits; rows of `words` words.
class BitPlanes {
 public:
  BitPlanes(const Grid& grid, const RunMask& mask, std::int64_t z_begin, std::int64_t z_end)
      : words_(grid.words), rows_(grid.size[1]), z_begin_(z_begin) {
    bits_.assign(static_cast<std::size_t>(words_ * rows_ * (z_end - z_begin)), 0);
    for (std::int64_t z = z_begin; z < z_end; ++z) {
      if (grid.beyond(2, z)) continue;
      for (std::int64_t y = 0; y < rows_; ++y) {
        if (!grid.beyond(1, y)) fill_row(grid, mask, y, z);
      }
    }
  }
  const Word* row(std::int64_t y, std::int64_t z) const {
    return bits_.data() + ((z - z_begin_) * rows_ + y) * words_;
  }

 private:
  void fill_row(const Grid& grid, const RunMask& mask, std::int64_t y, std::int64_t z) {
    Word* out = bits_.data() + ((z - z_begin_) * rows_ + y) * words_;
    const std::int64_t continued = grid.margin > 0 ? grid.margin - 1 : 0;
    for (const Run& run : mask.row(grid.voxel(1, y), grid.voxel(2, z))) {
      set_bits(out, run.begin == 0 ? grid.margin - continued : run.begin + grid.margin,
               run.end == grid.geometry.size[0] ? run.end + grid.margin + continued : run.end + grid.margin);
    }
  }
  std::int64_t words_, rows_, z_begin_;
  std::vector<Word> bits_;
};

// Bit x tells whether voxels x and x + 1 of the row differ.
Word changes_along(const Word* row, std::int64_t w, std::int64_t words, std::int64_t width) {
  const Word next = w + 1 < words ? row[w + 1] : 0;
  Word changes = row[w] ^ (row[w] >> 1 | next << 63);
  const std::int64_t last = width - 1 - w * word_bits;  // the last voxel has no neighbour
  if (last < word_bits) changes &= (Word{1} << last) - 1;
  return changes;
}

struct SlabMesh {
  std::vector<std::array<float, 3>> vertices;
  std::vector<std::array<std::uint32_t, 3>> triangles;
};

template <class T>
class SlabSurface {
 public:
  SlabSurface(const Grid& grid, const VolumeSource& source, std::int64_t z_begin, std::int64_t z_end)
      : grid_(grid),
        z_begin_(z_begin),
        z_end_(z_end),
        bits_(grid, grid.inside, z_begin, std::min(z_end + 2, grid.size[2])),
        reader_(source) {
    if (grid.open_at_padding) {
      field_.emplace_back(grid, grid.field.rows, z_begin, std::min(z_end + 1, grid.size[2]));
    }
    first_plane_ = grid.voxel(2, z_begin);
    const std::int64_t last_plane = grid.voxel(2, std::min(z_end, grid.size[2] - 1));
    voxels_ = reader_.template planes<T>(first_plane_, last_plane + 1);
    for (auto& ids : ids_) ids.resize(static_cast<std::size_t>(grid.size[0] * grid.size[1] * 3));
  }

  SlabMesh run() {
    number_plane(z_begin_);
    for (std::int64_t z = z_begin_; z < z_end_ && z + 1 < grid_.size[2]; ++z) {
      number_plane(z + 1);
      for (std::int64_t y = 0; y + 1 < grid_.size[1]; ++y) add_cells(y, z);
    }
    return std::move(mesh_);
  }

 private:
  std::uint32_t* ids(std::int64_t y, std::int64_t z) { return ids_[z & 1].data() + y * grid_.size[0] * 3; }

  // Numbers the crossed edges that start in plane z; makes their vertices if the plane is the slab's own.
  void number_plane(std::int64_t z) {
    for (std::int64_t y = 0; y < grid_.size[1]; ++y) {
      const Word* row = bits_.row(y, z);
      const Word* next_y = y + 1 < grid_.size[1] ? bits_.row(y + 1, z) : row;
      const Word* next_z = z + 1 < grid_.size[2] ? bits_.row(y, z + 1) : row;
      std::uint32_t* out = ids(y, z);
      for (std::int64_t w = 0; w < grid_.words; ++w) {
        const std::array<Word, 3> crossed{changes_along(row, w, grid_.words, grid_.size[0]),
                                          row[w] ^ next_y[w], row[w] ^ next_z[w]};
        for (Word any = crossed[0] | crossed[1] | crossed[2]; any != 0; any &= any - 1) {
          const int bit = std::countr_zero(any);
          const std::int64_t x = w * word_bits + bit;
          for (std::size_t axis = 0; axis < 3; ++axis) {
            if ((crossed[axis] >> bit & 1U) == 0) continue;
            out[x * 3 + static_cast<std::int64_t>(axis)] = numbered_++;
            if (z < z_end_) add_vertex(axis, {x, y, z}, (row[w] >> bit & 1U) != 0);
          }
        }
      }
    }
  }

  double grey(const std::array<std::int64_t, 3>& at) const {
    const std::int64_t x = grid_.voxel(0, at[0]), y = grid_.voxel(1, at[1]), z = grid_.voxel(2, at[2]);
    const auto& size = grid_.geometry.size;
    return static_cast<double>(voxels_[((z - first_plane_) * size[1] + y) * size[0] + x]);
  }

  void add_vertex(std::size_t axis, const std::array<std::int64_t, 3>& from, bool from_inside) {
    std::array<std::int64_t, 3> to = from;
    ++to[axis];
    const double in = grey(from_inside ? from : to), out = grey(from_inside ? to : from);
    double share = 0.5;  // of the edge, from the inside voxel
    if (in >= grid_.threshold && out < grid_.threshold && in_field(from_inside ? to : from)) {
      share = std::clamp(grid_.crossing.share(in, out), least_share, 1 - least_share);
    }
    Vec3 index;
    for (std::size_t a = 0; a < 3; ++a) index[a] = grid_.coordinate(a, from[a]);
    index[axis] += (from_inside ? share : 1 - share) * (grid_.coordinate(axis, to[axis]) - index[axis]);
    const Vec3 mm = grid_.geometry.index_to_mm(index);
    mesh_.vertices.push_back(
        {static_cast<float>(mm[0]), static_cast<float>(mm[1]), static_cast<float>(mm[2])});
  }

  bool in_field(const std::array<std::int64_t, 3>& at) const {
    return grid_.field.whole() ||
           contains(grid_.field.rows, grid_.voxel(0, at[0]), grid_.voxel(1, at[1]), grid_.voxel(2, at[2]));
  }

  void add_cells(std::int64_t y, std::int64_t z) {
    const std::array<const Word*, 4> rows{bits_.row(y, z), bits_.row(y + 1, z), bits_.row(y, z + 1),
                                          bits_.row(y + 1, z + 1)};
    const std::array<const std::uint32_t*, 4> row_ids{ids(y, z), ids(y + 1, z), ids(y, z + 1),
                                                      ids(y + 1, z + 1)};
    for (std::int64_t w = 0; w < grid_.words; ++w) {
      Word all = ~Word{0}, some = 0;
      std::array<Word, 4> here, next;
      for (std::size_t r = 0; r < 4; ++r) {
        here[r] = rows[r][w];
        next[r] = here[r] >> 1 | (w + 1 < grid_.words ? rows[r][w + 1] << 63 : 0);
        all &= here[r] & next[r];
        some |= here[r] | next[r];
      }
      Word mixed = some & ~all;
      const std::int64_t last = grid_.size[0] - 1 - w * word_bits;
      if (last < word_bits) mixed &= (Word{1} << last) - 1;
      if (mixed != 0 && grid_.open_at_padding) mixed &= whole_cells(y, z, w);
      for (; mixed != 0; mixed &= mixed - 1) {
        const int bit = std::countr_zero(mixed);
        unsigned pattern = 0;
        for (std::size_t r = 0; r < 4; ++r) {
          pattern |= static_cast<unsigned>((here[r] >> bit & 1U) | (next[r] >> bit & 1U) << 1) << (2 * r);
        }
        add_cell(pattern, row_ids, w * word_bits + bit);
      }
    }
  }

  // Bit x tells whether all eight voxels of the cell lie in the field of view.
  Word whole_cells(std::int64_t y, std::int64_t z, std::int64_t w) const {
    Word whole = ~Word{0};
    for (const Word* row : {field_[0].row(y, z), field_[0].row(y + 1, z), field_[0].row(y, z + 1),
                            field_[0].row(y + 1, z + 1)}) {
      whole &= row[w] & (row[w] >> 1 | (w + 1 < grid_.words ? row[w + 1] << 63 : 0));
    }
    return whole;
  }

  void add_cell(unsigned pattern, const std::array<const std::uint32_t*, 4>& row_ids, std::int64_t x) {
    const CellTriangles& cell = cells_[pattern];
    const auto id = [&](unsigned edge) {
      const unsigned corner = edge / 3, axis = edge % 3;
      return row_ids[corner >> 1][(x + (corner & 1U)) * 3 + axis];
    };
    for (std::size_t t = 0; t < cell.count; ++t) {
      const auto& e = cell.edges[t];
      if (grid_.mirrored) {
        mesh_.triangles.push_back({id(e[0]), id(e[2]), id(e[1])});
      } else {
        mesh_.triangles.push_back({id(e[0]), id(e[1]), id(e[2])});
      }
    }
  }

  const Grid& grid_;
  std::int64_t z_begin_, z_end_, first_plane_ = 0;
  BitPlanes bits_;
  std::vector<BitPlanes> field_;  // one, or none where cells may reach out of the field
  SlabReader reader_;
  const T* voxels_ = nullptr;
  std::array<std::vector<std::uint32_t>, 2> ids_;  // of the edges that start in an even and an odd plane
  std::uint32_t numbered_ = 0;
  SlabMesh mesh_;
  const std::array<CellTriangles, 256>& cells_ = cell_triangles();
};

TriangleMesh joined(std::vector<SlabMesh>& slabs) {
  std::vector<std::size_t> first_vertex{0}, first_triangle{0};
  for (const SlabMesh& slab : slabs) {
    first_vertex.push_back(first_vertex.back() + slab.vertices.size());
    first_triangle.push_back(first_triangle.back() + slab.triangles.size());
  }
  if (first_vertex.back() > std::numeric_limits<std::uint32_t>::max()) {
    throw Problem(ExitStatus::bad_data,
                  "surface: more than 4 thousand million vertices; this looks like noise, "
                  "not a part. Check the grey levels, or crop the volume");
  }
  TriangleMesh mesh;
  mesh.vertices_mm.resize(first_vertex.back());
  mesh.triangles.resize(first_triangle.back());
  tbb::parallel_for(std::size_t{0}, slabs.size(), [&](std::size_t s) {
    std::copy(slabs[s].vertices.begin(), slabs[s].vertices.end(),
              mesh.vertices_mm.begin() + static_cast<std::ptrdiff_t>(first_vertex[s]));
    const auto base = static_cast<std::uint32_t>(first_vertex[s]);
    std::transform(slabs[s].triangles.begin(), slabs[s].triangles.end(),
                   mesh.triangles.begin() + static_cast<std::ptrdiff_t>(first_triangle[s]),
                   [base](const std::array<std::uint32_t, 3>& t) {
                     return std::array<std::uint32_t, 3>{t[0] + base, t[1] + base, t[2] + base};
                   });
    slabs[s] = {};
  });
  return mesh;
}

// Cells that reach out of the field have no triangles; vertices that only they would use go.
void drop_unused_vertices(TriangleMesh& mesh) {
  constexpr std::uint32_t unused = std::numeric_limits<std::uint32_t>::max();
  std::vector<std::uint32_t> number(mesh.vertices_mm.size(), unused);
  for (const auto& t : mesh.triangles) {
    for (const std::uint32_t v : t) number[v] = 0;
  }
  std::uint32_t kept = 0;
  for (std::size_t v = 0; v < number.size(); ++v) {
    if (number[v] == unused) continue;
    mesh.vertices_mm[kept] = mesh.vertices_mm[v];
    number[v] = kept++;
  }
  mesh.vertices_mm.resize(kept);
  for (auto& t : mesh.triangles) {
    for (std::uint32_t& v : t) v = number[v];
  }
}

Grid grid_of(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
             const PartMap& part, const SurfaceOptions& options) {
  const VolumeGeometry& geometry = source.geometry();
  const RunMask& inside = options.fill_pores ? part.inside : part.material;
  if (inside.size() != geometry.size) {
    throw Problem(ExitStatus::internal, "surface: the part map belongs to another volume");
  }
  const std::int64_t margin = options.close_at_border && reaches_faces(inside) ? cap_planes : 0;
  const auto& d = geometry.direction;
  const double determinant = d[0] * (d[4] * d[8] - d[5] * d[7]) - d[1] * (d[3] * d[8] - d[5] * d[6]) +
                             d[2] * (d[3] * d[7] - d[4] * d[6]);
  Grid grid{inside,
            field,
            geometry,
            levels.threshold,
            EdgeCrossing(levels.threshold, levels.contrast()),
            !options.close_at_border && !field.whole(),
            margin,
            {},
            0,
            determinant < 0};
  for (std::size_t a = 0; a < 3; ++a) grid.size[a] = geometry.size[a] + 2 * margin;
  grid.words = (grid.size[0] + word_bits - 1) / word_bits;
  return grid;
}

}  // namespace

TriangleMesh extract_surface(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
                             const PartMap& part, const SurfaceOptions& options, const RunControl& control) {
  const Grid grid = grid_of(source, field, levels, part, options);
  const std::int64_t count = (grid.size[2] + slab_planes - 1) / slab_planes;
  std::vector<SlabMesh> slabs(static_cast<std::size_t>(count));
  control.step("surface", 0);
  tbb::parallel_for(std::int64_t{0}, count, [&](std::int64_t s) {
    if (control.cancelled()) return;
    const std::int64_t begin = s * slab_planes, end = std::min(begin + slab_planes, grid.size[2]);
    slabs[static_cast<std::size_t>(s)] = visit_voxel_type(source.voxel_type(), [&](auto* type) {
      return SlabSurface<std::remove_pointer_t<decltype(type)>>(grid, source, begin, end).run();
    });
  });
  control.throw_if_cancelled();
  TriangleMesh mesh = joined(slabs);
  if (!options.close_at_border) drop_unused_vertices(mesh);
  control.step("surface", 1);
  return mesh;
}

}  // namespace halfmark
