// How the part is told from its surroundings
//
// The material is what lies at or above ISO-50; the part is one 26-connected body of it. Outside is
// everything a ball of the closing radius covers when its centre moves through space without the ball
// touching the part, starting from beyond the field (a morphological closing of the part, by reachable balls
// only). Space beyond the field of view counts as open, so that a tightly cropped volume still has an
// outside. Other bodies do not hinder the ball.
//
// A closing also fills every concave edge. In a right-angled edge between two planes the fill has an
// inscribed radius of (3 - 2 sqrt 2) r = 0.17 r; fills thinner than min_inscribed_share * r are given back to
// the outside. A corner of three planes leaves (sqrt 3 - 1) / (sqrt 3 + 1) r = 0.27 r, as wide as a small
// pore; but most of its border is open, where a pore's is material: what is not clearly wider than a corner's
// fill must have a small mouth.
#include "analysis/part_map.h"

#include <algorithm>
#include <cmath>
#include <numeric>

#include "analysis/field_border.h"
#include "analysis/mask_morphology.h"
#include "analysis/threshold_mask.h"

namespace halfmark {

namespace {

constexpr double min_inscribed_share = 0.25;
constexpr double corner_inscribed_share = 0.27;
// Of the border's voxel faces. A blind hole as deep as its radius: 0.25; a corner's fill: a half and more.
constexpr double largest_mouth_share = 0.3;
// Distances between voxel centres read up to half a voxel more than to the surface between them.
constexpr double centre_to_face_voxels = 0.5;
// Below this a loose speck is noise or dust, not a body worth listing.
constexpr std::int64_t min_body_voxels = 64;
constexpr std::size_t max_listed_bodies = 100;
// With less of the field's border in the outside than this, the volume is probably filled by the part.
constexpr double little_outside_share = 0.01;

struct BodyVoxels {
  std::int64_t voxels = 0;
  std::array<std::int64_t, 3> min{1LL << 40, 1LL << 40, 1LL << 40}, max{-1, -1, -1};
  bool cut = false;
  std::int32_t label = 0;
};

std::vector<BodyVoxels> measure_bodies(const Components& components, const FieldOfView& field) {
  std::vector<BodyVoxels> bodies(static_cast<std::size_t>(components.count));
  const auto& size = components.labels.size();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (const LabelRun& run : components.labels.row(y, z)) {
        BodyVoxels& body = bodies[static_cast<std::size_t>(run.label - 1)];
        body.label = run.label;
        body.voxels += run.end - run.begin;
        const std::array<std::int64_t, 3> first{run.begin, y, z}, last{run.end - 1, y, z};
        for (std::size_t a = 0; a < 3; ++a) {
          body.min[a] = std::min(body.min[a], first[a]);
          body.max[a] = std::max(body.max[a], last[a]);
        }
        body.cut = body.cut || reaches_border({run.begin, run.end}, y, z, field.rows);
      }
    }
  }
  std::stable_sort(bodies.begin(), bodies.end(),
                   [](const BodyVoxels& a, const BodyVoxels& b) { return a.voxels > b.voxels; });
  return bodies;
}

Body to_mm(const BodyVoxels& body, const VolumeGeometry& geometry) {
  Body out;
  out.voxels = body.voxels;
  out.volume_mm3 = static_cast<double>(body.voxels) * geometry.voxel_volume_mm3();
  out.cut_by_field = body.cut;
  out.min_mm = {1e300, 1e300, 1e300};
  out.max_mm = {-1e300, -1e300, -1e300};
  for (int corner = 0; corner < 8; ++corner) {
    Vec3 index;
    for (std::size_t a = 0; a < 3; ++a)
      index[a] = static_cast<double>((corner >> a) & 1 ? body.max[a] : body.min[a]);
    const Vec3 mm = geometry.index_to_mm(index);
    for (std::size_t a = 0; a < 3; ++a) {
      out.min_mm[a] = std::min(out.min_mm[a], mm[a]);
      out.max_mm[a] = std::max(out.max_mm[a], mm[a]);
    }
  }
  return out;
}

void mark_overlaps(std::span<const LabelRun> runs, std::span<const Run> row, std::int32_t reach,
                   std::vector<std::uint8_t>& marked) {
  std::size_t j = 0;
  for (const LabelRun& run : runs) {
    while (j < row.size() && row[j].end + reach <= run.begin) ++j;
    if (j < row.size() && row[j].begin - reach < run.end) marked[static_cast<std::size_t>(run.label)] = 1;
  }
}

// Labels of components of which a voxel lies in `mask`.
std::vector<std::uint8_t> labels_in(const RunLabels& labels, std::int32_t count, const RunMask& mask) {
  std::vector<std::uint8_t> marked(static_cast<std::size_t>(count) + 1, 0);
  const auto& size = labels.size();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) mark_overlaps(labels.row(y, z), mask.row(y, z), 0, marked);
  }
  return marked;
}

// Labels of components of which a voxel is a 6-neighbour of `mask`.
std::vector<std::uint8_t> labels_beside(const RunLabels& labels, std::int32_t count, const RunMask& mask) {
  std::vector<std::uint8_t> marked(static_cast<std::size_t>(count) + 1, 0);
  const auto& size = labels.size();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      const auto runs = labels.row(y, z);
      if (runs.empty()) continue;
      mark_overlaps(runs, mask.row(y, z), 1, marked);
      if (y > 0) mark_overlaps(runs, mask.row(y - 1, z), 0, marked);
      if (y + 1 < size[1]) mark_overlaps(runs, mask.row(y + 1, z), 0, marked);
      if (z > 0) mark_overlaps(runs, mask.row(y, z - 1), 0, marked);
      if (z + 1 < size[2]) mark_overlaps(runs, mask.row(y, z + 1), 0, marked);
    }
  }
  return marked;
}

// The row of the field of view that stands for row (y, z): itself, or the nearest one in its plane that is
// not empty.
std::int64_t nearest_field_row(const FieldOfView& field, std::int64_t y, std::int64_t z) {
  const std::int64_t ny = field.rows.size()[1];
  for (std::int64_t d = 0; d < ny; ++d) {
    if (y - d >= 0 && !field.rows.row(y - d, z).empty()) return y - d;
    if (y + d < ny && !field.rows.row(y + d, z).empty()) return y + d;
  }
  return y;
}

// The mask with `margin` more voxels on every side, the field's last voxels continued outwards.
RunMask continued(const RunMask& mask, const FieldOfView& field, std::int64_t margin) {
  const auto& from = mask.size();
  const std::array<std::int64_t, 3> size{from[0] + 2 * margin, from[1] + 2 * margin, from[2] + 2 * margin};
  const auto width = static_cast<std::int32_t>(size[0]), shift = static_cast<std::int32_t>(margin);
  RunMask out(size);
  for (std::int64_t z = 0; z < size[2]; ++z) {
    const std::int64_t source_z = std::clamp<std::int64_t>(z - margin, 0, from[2] - 1);
    for (std::int64_t y = 0; y < size[1]; ++y) {
      const std::int64_t source_y =
          nearest_field_row(field, std::clamp<std::int64_t>(y - margin, 0, from[1] - 1), source_z);
      const auto field_row = field.rows.row(source_y, source_z);
      for (const Run& run : mask.row(source_y, source_z)) {
        out.add_run({run.begin <= field_row.front().begin ? 0 : run.begin + shift,
                     run.end >= field_row.back().end ? width : run.end + shift});
      }
      out.end_row();
    }
  }
  return out;
}

std::vector<std::uint8_t> labels_at_border(const RunLabels& labels, std::int32_t count) {
  std::vector<std::uint8_t> found(static_cast<std::size_t>(count) + 1, 0);
  const auto& size = labels.size();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      const bool border_row = y == 0 || z == 0 || y + 1 == size[1] || z + 1 == size[2];
      for (const LabelRun& run : labels.row(y, z)) {
        if (border_row || run.begin == 0 || run.end == size[0])
          found[static_cast<std::size_t>(run.label)] = 1;
      }
    }
  }
  return found;
}

// What the ball covers, reaching every place it can get to from the border; cropped to the volume.
RunMask rolled_over(const RunMask& material, const FieldOfView& field, const PartOptions& options,
                    const Vec3& spacing_mm, const RunControl& control) {
  const double least_spacing = *std::min_element(spacing_mm.begin(), spacing_mm.end());
  const auto margin = static_cast<std::int64_t>(std::ceil(options.closing_radius_mm / least_spacing)) + 2;
  control.step("part", 0.3);
  const RunMask centres =
      complement(dilate(continued(material, field, margin), options.closing_radius_mm, spacing_mm, control));
  const Components free = connected_components(centres, 6);
  control.step("part", 0.6);
  const RunMask reached = selected(free.labels, labels_at_border(free.labels, free.count));
  return padded(dilate(reached, options.closing_radius_mm, spacing_mm, control), -margin);
}

std::int64_t overlap_of(const LabelRun& run, std::span<const Run> row) {
  const auto ends_behind = [](std::int32_t x, const Run& r) { return x < r.end; };
  std::int64_t sum = 0;
  for (auto r = std::upper_bound(row.begin(), row.end(), run.begin, ends_behind);
       r != row.end() && r->begin < run.end; ++r)
    sum += std::min(run.end, r->end) - std::max(run.begin, r->begin);
  return sum;
}

// Voxel faces of each label towards a mask.
std::vector<std::int64_t> faces_towards(const RunLabels& labels, std::int32_t count, const RunMask& mask) {
  std::vector<std::int64_t> faces(static_cast<std::size_t>(count) + 1, 0);
  const auto& size = labels.size();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      for (const LabelRun& run : labels.row(y, z)) {
        std::int64_t& sum = faces[static_cast<std::size_t>(run.label)];
        sum += contains(mask, run.begin - 1, y, z) + contains(mask, run.end, y, z);
        if (y > 0) sum += overlap_of(run, mask.row(y - 1, z));
        if (y + 1 < size[1]) sum += overlap_of(run, mask.row(y + 1, z));
        if (z > 0) sum += overlap_of(run, mask.row(y, z - 1));
        if (z + 1 < size[2]) sum += overlap_of(run, mask.row(y, z + 1));
      }
    }
  }
  return faces;
}

// Labels whose border is material but for a small mouth: what lies beside them in `open` outside of
// themselves, and the outside, is mouth.
std::vector<std::uint8_t> labels_with_small_mouth(const Components& pores, const RunMask& wide,
                                                  const RunMask& outside, const RunMask& open) {
  const auto faces = [&](const RunMask& mask) { return faces_towards(pores.labels, pores.count, mask); };
  const std::vector<std::int64_t> to_outside = faces(outside), to_rest = faces(difference(open, wide)),
                                  within = faces(wide);
  std::vector<std::int64_t> border(within.size(), 0);
  for (const LabelRun& run : pores.labels.runs())
    border[static_cast<std::size_t>(run.label)] += 4 * (run.end - run.begin) + 2;  // along x only the ends
  std::vector<std::uint8_t> small(border.size(), 0);
  for (std::size_t l = 1; l < small.size(); ++l) {
    const auto mouth = static_cast<double>(to_outside[l] + to_rest[l]);
    small[l] = mouth <= largest_mouth_share * static_cast<double>(border[l] - within[l]) ? 1 : 0;
  }
  return small;
}

struct Hollows {
  RunMask open;     // open pores
  RunMask shallow;  // belongs to the outside after all
};

// Sorts the air behind the ball's reach that is connected with the outside.
Hollows sort_hollows(const RunMask& hollow, const RunMask& outside, const PartOptions& options,
                     const Vec3& spacing_mm, const RunControl& control) {
  const Components parts = connected_components(hollow, 6);
  const double voxel = std::cbrt(spacing_mm[0] * spacing_mm[1] * spacing_mm[2]);
  const RunMask open = selected(parts.labels, labels_beside(parts.labels, parts.count, outside));
  if (open.empty()) return {open, open};

  const double inscribed = min_inscribed_share * options.closing_radius_mm + centre_to_face_voxels * voxel;
  const RunMask cores = erode(open, inscribed, spacing_mm, true, control);
  if (cores.empty()) return {cores, open};
  const RunMask wide = intersection(open, dilate(cores, inscribed + voxel, spacing_mm, control));
  const Components pores = connected_components(wide, 6);
  const RunMask deep = options.open_min_depth_mm > 0
                           ? difference(wide, dilate(outside, options.open_min_depth_mm, spacing_mm, control))
                           : wide;
  std::vector<std::uint8_t> keep = labels_in(pores.labels, pores.count, deep);
  const double clearly_wide =
      corner_inscribed_share * options.closing_radius_mm + 2 * centre_to_face_voxels * voxel;
  const std::vector<std::uint8_t> surely =
      labels_in(pores.labels, pores.count, erode(open, clearly_wide, spacing_mm, true, control));
  const std::vector<std::uint8_t> small_mouth = labels_with_small_mouth(pores, wide, outside, open);
  for (std::size_t l = 1; l < keep.size(); ++l) {
    if (surely[l] == 0 && small_mouth[l] == 0) keep[l] = 0;
  }
  Hollows out;
  out.open = selected(pores.labels, keep);
  out.shallow = difference(open, out.open);
  return out;
}

double border_share(const RunMask& mask, const FieldOfView& field) {
  std::int64_t border = 0, held = 0;
  const auto& size = mask.size();
  for (std::int64_t z = 0; z < size[2]; ++z) {
    for (std::int64_t y = 0; y < size[1]; ++y) {
      const auto row = field.rows.row(y, z);
      if (row.empty()) continue;
      const bool whole_row = y == 0 || z == 0 || y + 1 == size[1] || z + 1 == size[2];
      if (whole_row) {
        for (const Run& run : row) border += run.end - run.begin;
        for (const Run& run : mask.row(y, z)) held += run.end - run.begin;
      } else {
        border += 2;
        held += contains(mask, row.front().begin, y, z) + contains(mask, row.back().end - 1, y, z);
      }
    }
  }
  return border == 0 ? 0 : static_cast<double>(held) / static_cast<double>(border);
}

void choose_body(PartMap& part, const Components& components, const std::vector<BodyVoxels>& bodies,
                 const PartOptions& options, const VolumeGeometry& geometry) {
  std::size_t listed = 0;
  while (listed < bodies.size() && listed < max_listed_bodies &&
         (listed == 0 || bodies[listed].voxels >= min_body_voxels))
    ++listed;
  for (std::size_t i = 0; i < listed; ++i) part.bodies.push_back(to_mm(bodies[i], geometry));
  part.body = options.body == 0 ? 1 : options.body;
  if (part.body < 1 || static_cast<std::size_t>(part.body) > listed) {
    throw Problem(ExitStatus::bad_data, "part: there is no body " + std::to_string(options.body) +
                                            "; the volume holds " + std::to_string(listed) +
                                            (listed == 1 ? " body" : " bodies") +
                                            ", numbered from 1, the largest");
  }
  const BodyVoxels& chosen = bodies[static_cast<std::size_t>(part.body - 1)];
  std::vector<std::uint8_t> keep(static_cast<std::size_t>(components.count) + 1, 0);
  keep[static_cast<std::size_t>(chosen.label)] = 1;
  part.material = selected(components.labels, keep);
  part.cut_by_field = chosen.cut;
}

}  // namespace

PartMap find_part(const VolumeSource& source, const FieldOfView& field, const GreyLevels& levels,
                  const PartOptions& options, const RunControl& control) {
  const VolumeGeometry& geometry = source.geometry();
  control.step("part", 0);
  const Components components =
      connected_components(voxels_at_or_above(source, field, levels.threshold, control), 26);
  if (components.count == 0) {
    throw Problem(ExitStatus::bad_data,
                  "part: no voxel reaches the threshold of " + std::to_string(levels.threshold) +
                      "; check the levels in the spec (grey_levels) against `halfmark levels`");
  }
  PartMap part;
  part.closing_radius_mm = options.closing_radius_mm;
  choose_body(part, components, measure_bodies(components, field), options, geometry);

  const RunMask outside =
      intersection(rolled_over(part.material, field, options, geometry.spacing_mm, control), field.rows);
  part.has_outside = !outside.empty();
  const RunMask behind = difference(difference(field.rows, part.material), outside);
  control.step("part", 0.8);
  if (part.has_outside) {
    Hollows hollows = sort_hollows(behind, outside, options, geometry.spacing_mm, control);
    part.inside = difference(difference(field.rows, outside), hollows.shallow);
    part.open_air = std::move(hollows.open);
    if (border_share(outside, field) < little_outside_share) {
      part.warnings.push_back(
          "hardly any air lies around the part in this volume: pores at its border may be taken for the "
          "outside");
    }
  } else {
    part.inside = field.rows;
    part.open_air = empty_rows<RunMask>(geometry.size);
  }
  control.step("part", 1);
  return part;
}

}  // namespace halfmark
