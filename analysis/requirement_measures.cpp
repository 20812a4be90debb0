// Which pores count: those whose centre lies in the zone, not left out, not excluded by an inspector, of at
// least ignore_below_mm. Volumes are clipped at the zone. Diffuse regions count to porosities with their
// deficit, not to sizes, numbers and gaps; in-between grey counts to none of them; inclusions to inclusion
// quantities only.
#include "analysis/requirement_measures.h"

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <numeric>

#include "analysis/moving_porosity.h"
#include "analysis/surface.h"
#include "analysis/zone_sums.h"

namespace halfmark {

namespace {

// A caliper between two sides that are each placed to about a quarter of a voxel: a first estimate.
constexpr double caliper_voxels = 0.35;

std::string text(const char* format, double a, double b = 0) {
  char out[200];
  std::snprintf(out, sizeof out, format, a, b);
  return out;
}

bool is_void(const Pore& p) { return p.kind != PoreKind::inclusion && p.kind != PoreKind::in_between; }

struct Selection {
  std::vector<const Pore*> pores;    // with a centre in the zone
  std::vector<std::uint8_t> counts;  // per id: counts to porosities (anywhere)
};

class Measure {
 public:
  Measure(const Requirement& r, const InspectionSpec& spec, const ZoneSet& zones, const MeasuredPart& m)
      : r_(r), spec_(spec), zones_(zones), m_(m), zone_(zones.index_of(r.zone)) {
    result_.requirement = r;
    result_.unit = unit_of(r.quantity, r.relative);
    const bool inclusions =
        r.quantity == Quantity::inclusion_diameter || r.quantity == Quantity::inclusion_count;
    selection_.counts.assign(m.pores.pores.size() + 1, 0);
    for (const Pore& p : m.pores.pores) {
      if (p.left_out || !p.disposition.empty()) continue;
      if (r.ignore_below_mm && p.equivalent_diameter_mm < *r.ignore_below_mm) continue;
      if (is_void(p) && !inclusions) selection_.counts[static_cast<std::size_t>(p.id)] = 1;
      const bool fits =
          inclusions ? p.kind == PoreKind::inclusion : is_void(p) && p.kind != PoreKind::diffuse;
      if (fits && std::find(p.zones.begin(), p.zones.end(), r.zone) != p.zones.end())
        selection_.pores.push_back(&p);
    }
  }

  RequirementResult run(const RunControl& control) {
    control.throw_if_cancelled();
    switch (r_.quantity) {
      case Quantity::porosity:
        porosity(false);
        break;
      case Quantity::open_porosity:
        porosity(true);
        break;
      case Quantity::section_porosity:
        section();
        break;
      case Quantity::local_porosity:
        local();
        break;
      case Quantity::pore_count:
      case Quantity::inclusion_count:
        count(1);
        break;
      case Quantity::pore_density:
        density();
        break;
      case Quantity::pore_diameter:
      case Quantity::inclusion_diameter:
        diameter();
        break;
      case Quantity::pore_length:
        pore_length();
        break;
      case Quantity::pore_spacing:
        spacing();
        break;
      case Quantity::pore_nest:
        nest();
        break;
      case Quantity::pore_depth:
        depth();
        break;
      case Quantity::wall_thickness:
        wall();
        break;
      case Quantity::material_volume:
        material_volume();
        break;
      case Quantity::surface_area:
        surface_area();
        break;
    }
    warn();
    return result_;
  }

 private:
  double voxel_mm() const { return m_.geometry.voxel_mm(); }

  void set(double value, std::vector<Contribution> contributions) {
    result_.has_value = true;
    result_.measured.value = value;
    double sum = 0;
    for (const Contribution& c : contributions) sum += c.standard_uncertainty * c.standard_uncertainty;
    result_.measured.standard_uncertainty = std::sqrt(sum);
    result_.measured.contributions = std::move(contributions);
  }
  void point_at(const Pore& p, const std::string& what) {
    result_.evidence = {p.id, p.centre_mm, std::max(p.length_mm, p.equivalent_diameter_mm),
                        what + " " + std::to_string(p.id)};
  }
  void none(const std::string& reason, bool met) {
    result_.reason = reason;
    result_.met_without_value = met;
  }

  // Summed pore share of the zone with its uncertainty, in voxels; noise adds in squares, level and threshold
  // in full.
  struct Total {
    double voxels = 0;
    std::vector<Contribution> contributions;
    const Pore* largest = nullptr;
  };
  Total total(const ZoneSums& sums, bool only_open) const {
    Total out;
    double noise = 0, level = 0, threshold = 0, window = 0, most = 0;
    const double voxel = m_.geometry.voxel_volume_mm3();
    for (const Pore& p : m_.pores.pores) {
      if (selection_.counts[static_cast<std::size_t>(p.id)] == 0 || (only_open && !p.open)) continue;
      const double share = static_cast<double>(sums.pore[static_cast<std::size_t>(p.id)]) / PoreField::unit;
      if (share == 0) continue;
      out.voxels += share;
      if (share > most) {
        most = share;
        out.largest = &p;
      }
      const double part = std::clamp(share * voxel / std::max(p.volume_mm3.value, 1e-300), 0.0, 1.0);
      for (const Contribution& c : p.volume_mm3.contributions) {
        const double u = part * c.standard_uncertainty / voxel;
        if (c.name == "noise") {
          noise += u * u;
        } else if (c.name == "local level") {
          level += u * u;  // largely each ring's own noise
        } else if (c.name == "threshold") {
          threshold += u;
        } else {
          window += u;
        }
      }
    }
    out.contributions = {{"noise", std::sqrt(noise)},
                         {"local level", std::sqrt(level)},
                         {"threshold", threshold},
                         {"window and digitisation", window}};
    return out;
  }

  double part_voxels(const ZoneSums& sums) const { return static_cast<double>(sums.part_voxels); }

  void porosity(bool only_open) {
    const ZoneSums sums = sum_zone(m_.pores.field, m_.pores.pores.size(), m_.part, zones_, zone_);
    if (sums.part_voxels == 0) return none("the zone holds no part", false);
    Total t = total(sums, only_open);
    const double scale = 100 / part_voxels(sums);
    for (Contribution& c : t.contributions) c.standard_uncertainty *= scale;
    set(std::max(0.0, t.voxels * scale), t.contributions);
    if (t.largest != nullptr) {
      point_at(*t.largest, only_open ? "open porosity, largest pore" : "porosity, largest pore");
    } else {
      result_.evidence.what = only_open ? "open porosity, no open pore found" : "porosity, no pore found";
    }
  }

  void moving(const std::optional<WorstPlace>& worst, const std::string& nothing, const std::string& what) {
    if (!worst) return none(nothing, false);
    // The same relative uncertainty as all of the zone's porosity, and the step of the moving body.
    const ZoneSums sums = sum_zone(m_.pores.field, m_.pores.pores.size(), m_.part, zones_, zone_);
    const Total t = total(sums, false);
    double u = 0;
    for (const Contribution& c : t.contributions) u += c.standard_uncertainty * c.standard_uncertainty;
    const double relative = t.voxels > 0 ? std::sqrt(u) / t.voxels : 0;
    set(worst->percent,
        {{"pore volumes", worst->percent * relative}, {"steps of the moving body", 0.02 * worst->percent}});
    result_.evidence = {0, m_.geometry.index_to_mm(worst->index), worst->extent_mm, what};
  }

  void section() {
    std::optional<WorstPlace> worst;
    for (int axis = 0; axis < 3; ++axis) {
      if (r_.axis && *r_.axis != axis) continue;
      const auto place = worst_section(m_.pores.field, selection_.counts, m_.part, zones_, zone_, m_.geometry,
                                       axis, r_.window_mm);
      if (place && (!worst || place->percent > worst->percent)) worst = place;
    }
    std::string what = "section";
    if (worst) {
      const double at = m_.geometry.index_to_mm(worst->index)[static_cast<std::size_t>(worst->axis)];
      what = std::string(r_.window_mm ? "window in section " : "section ") + "xyz"[worst->axis] +
             text(" = %.4g mm", at);
    }
    moving(worst, "no window of that size lies in the zone with at least 80 % part", what);
  }

  void local() {
    const auto worst = worst_reference(m_.pores.field, selection_.counts, m_.part, zones_, zone_, m_.geometry,
                                       *r_.reference);
    moving(worst, "no reference body of that size lies in the zone with at least 80 % part",
           r_.reference->sphere ? "reference sphere" : "reference cube");
  }

  // Pores within their own uncertainty of the size limit may or may not count.
  double count_uncertainty() const {
    if (!r_.ignore_below_mm) return 0;
    double near = 0;
    for (const Pore& p : m_.pores.pores) {
      if (p.left_out || !is_void(p) || std::find(p.zones.begin(), p.zones.end(), r_.zone) == p.zones.end())
        continue;
      near +=
          std::abs(p.equivalent_diameter_mm - *r_.ignore_below_mm) < 2 * p.diameter_standard_uncertainty_mm;
    }
    return 0.5 * near;
  }

  void count(double per) {
    set(static_cast<double>(selection_.pores.size()) / per,
        {{"pores near the size limit", count_uncertainty() / per}});
    result_.evidence.what = r_.quantity == Quantity::inclusion_count ? "inclusions counted" : "pores counted";
    if (!selection_.pores.empty()) {
      point_at(*selection_.pores.front(), "count, largest: number");
    }
  }

  void density() {
    const ZoneSums sums = sum_zone(m_.pores.field, m_.pores.pores.size(), m_.part, zones_, zone_);
    if (sums.part_voxels == 0) return none("the zone holds no part", false);
    count(part_voxels(sums) * m_.geometry.voxel_volume_mm3() / 1000);
  }

  template <class Value>
  const Pore* extreme(Value&& value, bool largest) const {
    const Pore* best = nullptr;
    for (const Pore* p : selection_.pores) {
      if (std::isnan(value(*p))) continue;
      if (best == nullptr || (largest ? value(*p) > value(*best) : value(*p) < value(*best))) best = p;
    }
    return best;
  }
  bool any_cut() const {
    return std::any_of(selection_.pores.begin(), selection_.pores.end(),
                       [](const Pore* p) { return p->cut_by_field; });
  }

  void diameter() {
    const bool inclusions = r_.quantity == Quantity::inclusion_diameter;
    const Pore* p = extreme([](const Pore& q) { return q.equivalent_diameter_mm; }, true);
    if (p == nullptr)
      return none(inclusions ? "no inclusion was found in the zone" : "no pore was found in the zone",
                  !inclusions || spec_.pores.inclusions);
    set(p->equivalent_diameter_mm, {{"volume", p->diameter_standard_uncertainty_mm}});
    result_.lower_bound = any_cut();
    point_at(*p, inclusions ? "inclusion" : "pore");
  }

  void pore_length() {
    const Pore* p = extreme([](const Pore& q) { return q.length_mm; }, true);
    if (p == nullptr) return none("no pore was found in the zone", true);
    set(p->length_mm, {{"volume", p->length_mm * p->diameter_standard_uncertainty_mm /
                                      std::max(p->equivalent_diameter_mm, 1e-300)},
                       {"calipers", caliper_voxels * voxel_mm()}});
    result_.lower_bound = any_cut();
    point_at(*p, "pore");
  }

  void spacing() {
    const Pore* best = nullptr;
    double least = 0, smaller = 1;
    for (const Pore* p : selection_.pores) {
      if (std::isnan(p->spacing_mm) || p->nearest_id == 0) continue;
      const Pore& other = m_.pores.pores[static_cast<std::size_t>(p->nearest_id - 1)];
      if (other.left_out || !other.disposition.empty() ||
          (r_.ignore_below_mm && other.equivalent_diameter_mm < *r_.ignore_below_mm))
        continue;
      const double diameter = std::min(p->equivalent_diameter_mm, other.equivalent_diameter_mm);
      const double value = r_.relative ? p->spacing_mm / diameter : p->spacing_mm;
      if (best == nullptr || value < least) {
        best = p;
        least = value;
        smaller = diameter;
      }
    }
    if (best == nullptr) return none("no two pores lie near each other in the zone", true);
    const double u = caliper_voxels * voxel_mm() / (r_.relative ? smaller : 1);
    set(least, {{"pore surfaces", u}});
    point_at(*best, "gap beside pore");
  }

  void depth() {
    const Pore* p =
        extreme([](const Pore& q) { return q.kind == PoreKind::closed ? q.depth_mm : not_measured; }, false);
    if (p == nullptr)
      return none(m_.part.has_outside ? "no closed pore was found in the zone"
                                      : "the part fills the field: it has no surface to measure a depth from",
                  m_.part.has_outside);
    set(p->depth_mm, {{"pore and part surface", caliper_voxels * voxel_mm()}});
    point_at(*p, "pore");
  }

  void nest() {
    // Linked by gaps smaller than the smaller of the two; gaps between equivalent spheres.
    auto pores = selection_.pores;
    std::sort(pores.begin(), pores.end(), [](const Pore* a, const Pore* b) {
      return a->centre_mm[0] != b->centre_mm[0] ? a->centre_mm[0] < b->centre_mm[0] : a->id < b->id;
    });
    std::vector<std::size_t> group(pores.size());
    std::iota(group.begin(), group.end(), std::size_t{0});
    const auto root = [&](std::size_t i) {
      while (group[i] != i) i = group[i] = group[group[i]];
      return i;
    };
    double largest = 0;
    for (const Pore* p : pores) largest = std::max(largest, p->equivalent_diameter_mm);
    for (std::size_t i = 0; i < pores.size(); ++i) {
      for (std::size_t j = i + 1;
           j < pores.size() && pores[j]->centre_mm[0] - pores[i]->centre_mm[0] < 2 * largest; ++j) {
        const double a = pores[i]->equivalent_diameter_mm, b = pores[j]->equivalent_diameter_mm;
        if (length(pores[j]->centre_mm - pores[i]->centre_mm) - 0.5 * (a + b) < std::min(a, b))
          group[root(i)] = root(j);
      }
    }
    double extent = 0;
    const Pore* at = nullptr;
    for (std::size_t i = 0; i < pores.size(); ++i) {
      for (std::size_t j = i + 1; j < pores.size(); ++j) {
        if (root(i) != root(j)) continue;
        const double e = length(pores[j]->centre_mm - pores[i]->centre_mm) +
                         0.5 * (pores[i]->length_mm + pores[j]->length_mm);
        if (e > extent) {
          extent = e;
          at = pores[i]->equivalent_diameter_mm > pores[j]->equivalent_diameter_mm ? pores[i] : pores[j];
        }
      }
    }
    if (at == nullptr) return none("no pores lie near enough to each other to form a nest", true);
    set(extent, {{"calipers", caliper_voxels * voxel_mm()}});
    result_.evidence = {at->id, at->centre_mm, extent, "nest around pore " + std::to_string(at->id)};
  }

  std::vector<std::uint8_t> vertices_in_zone(const TriangleMesh& mesh) const {
    std::vector<std::uint8_t> in_zone;
    if (zones_.spec(zone_).shape == ZoneShape::everything) return in_zone;
    in_zone.reserve(mesh.vertices_mm.size());
    for (const auto& v : mesh.vertices_mm) {
      const Vec3 mm{v[0], v[1], v[2]};
      in_zone.push_back(zones_.contains(zone_, mm) && !zones_.left_out(mm));
    }
    return in_zone;
  }

  void wall() {
    if (m_.walls == nullptr || m_.outer_surface == nullptr) return none("walls were not measured", false);
    const auto in_zone = vertices_in_zone(*m_.outer_surface);
    const WallSummary summary =
        summarise_walls(*m_.outer_surface, *m_.walls, spec_.walls, in_zone, r_.min.value_or(0), 1);
    if (!summary.any_wall)
      return none(
          "no wall was found in the zone (a place whose sphere touches two sides at least 120° apart)",
          false);
    if (r_.percentile) {
      set(wall_percentile(*m_.outer_surface, *m_.walls, in_zone, *r_.percentile),
          {{"wall", m_.walls->standard_uncertainty_mm}});
      result_.evidence.what = text("wall, %.4g %% percentile", *r_.percentile);
    } else {
      set(summary.least_mm.value, {{"wall", summary.least_mm.standard_uncertainty}});
      result_.evidence.what = "thinnest wall";
    }
    if (!summary.spots.empty()) {
      result_.evidence.position_mm = summary.spots.front().position_mm;
      result_.evidence.extent_mm = summary.spots.front().patch_mean_mm;
    }
    if (result_.measured.value >= spec_.walls.max_mm) {
      result_.lower_bound = true;
      result_.warnings.push_back(
          text("walls are measured up to %.4g mm: this one is that thick or thicker", spec_.walls.max_mm));
    }
  }

  double shift_mm() const {
    // A shift of the threshold by its uncertainty moves a Gaussian edge by u / slope.
    const double blur = std::hypot(m_.levels.blur_mm, voxel_mm() / std::sqrt(12.0));
    return m_.levels.threshold_standard_uncertainty / m_.levels.contrast() * blur *
           std::sqrt(2 * 3.14159265358979);
  }

  void material_volume() {
    const bool all = zones_.spec(zone_).shape == ZoneShape::everything && m_.surface != nullptr;
    const ZoneSums sums = sum_zone(m_.pores.field, m_.pores.pores.size(), m_.part, zones_, zone_);
    if (sums.part_voxels == 0) return none("the zone holds no part", false);
    const double voxel = m_.geometry.voxel_volume_mm3();
    double value = (part_voxels(sums) - total(sums, false).voxels) * voxel;
    if (all) value = enclosed_volume_mm3(*m_.surface);
    const double area = m_.surface != nullptr ? surface_area_mm2(*m_.surface) : 0;
    set(value, {{"threshold", area * shift_mm()},
                {"voxel count", all ? 0 : std::sqrt(area / (voxel_mm() * voxel_mm()) / 12) * voxel}});
    result_.evidence.what = "material volume";
  }

  void surface_area() {
    if (m_.surface == nullptr) return none("the surface was not extracted", false);
    double area = 0;
    const bool all = zones_.spec(zone_).shape == ZoneShape::everything;
    for (const auto& t : m_.surface->triangles) {
      Vec3 p[3];
      for (std::size_t i = 0; i < 3; ++i)
        p[i] = {m_.surface->vertices_mm[t[i]][0], m_.surface->vertices_mm[t[i]][1],
                m_.surface->vertices_mm[t[i]][2]};
      const Vec3 middle = (1.0 / 3) * (p[0] + p[1] + p[2]);
      if (!all && (!zones_.contains(zone_, middle) || zones_.left_out(middle))) continue;
      area += 0.5 * length(cross(p[1] - p[0], p[2] - p[0]));
    }
    // Noise roughens a triangulated surface: a first estimate of two percent.
    set(area, {{"roughness of the triangulation", 0.02 * area}});
    result_.evidence.what = "surface area";
  }

  void warn() {
    const double smallest = m_.smallest_expected_diameter_mm;
    double limit = 0;
    if (r_.quantity == Quantity::pore_diameter || r_.quantity == Quantity::pore_length)
      limit = r_.max.value_or(0);
    if (r_.quantity == Quantity::pore_count || r_.quantity == Quantity::pore_density ||
        r_.quantity == Quantity::pore_spacing || r_.quantity == Quantity::pore_depth) {
      limit = r_.ignore_below_mm.value_or(0);
      if (!r_.ignore_below_mm && smallest > 0) {
        result_.warnings.push_back(
            text("without ignore_below_mm every pore counts, but pores below about %.3g mm cannot be seen in "
                 "this scan",
                 smallest));
      }
    }
    if (limit > 0 && smallest > limit) {
      result_.warnings.push_back(
          text("the limit of %.3g mm lies below what blur and noise let this scan show (about %.3g mm, an "
               "estimate): the requirement cannot be proved by it",
               limit, smallest));
    }
    if (any_cut() && r_.quantity != Quantity::wall_thickness && r_.quantity != Quantity::material_volume &&
        r_.quantity != Quantity::surface_area) {
      result_.warnings.emplace_back("pores are cut by the field of view: their sizes are lower bounds");
    }
    const bool powder = std::any_of(m_.pores.pores.begin(), m_.pores.pores.end(), [](const Pore& p) {
      return p.kind == PoreKind::in_between && !p.left_out;
    });
    if (powder && (r_.quantity == Quantity::porosity || r_.quantity == Quantity::pore_diameter ||
                   r_.quantity == Quantity::pore_count)) {
      result_.warnings.emplace_back(
          "regions of in-between grey (trapped powder, core sand) were found; they are listed but do not "
          "count as pores");
    }
  }

  const Requirement& r_;
  const InspectionSpec& spec_;
  const ZoneSet& zones_;
  const MeasuredPart& m_;
  std::size_t zone_;
  Selection selection_;
  RequirementResult result_;
};

}  // namespace

void assign_zones(std::vector<Pore>& pores, const ZoneSet& zones) {
  for (Pore& pore : pores) {
    pore.zones.clear();
    pore.left_out = zones.left_out(pore.centre_mm);
    for (std::size_t i = 0; i < zones.count(); ++i) {
      if (zones.spec(i).use == ZoneUse::inspect && zones.contains(i, pore.centre_mm))
        pore.zones.push_back(zones.spec(i).id);
    }
  }
}

RequirementResult measure_requirement(const Requirement& requirement, const InspectionSpec& spec,
                                      const ZoneSet& zones, const MeasuredPart& measured,
                                      const RunControl& control) {
  return Measure(requirement, spec, zones, measured).run(control);
}

PoreSummary summarise_pores(const MeasuredPart& m, const ZoneSet& zones) {
  (void)zones;
  PoreSummary out;
  double variance = 0, open = 0;
  for (const Pore& p : m.pores.pores) {
    if (p.left_out || !p.disposition.empty()) continue;
    out.inclusions += p.kind == PoreKind::inclusion;
    out.in_between += p.kind == PoreKind::in_between;
    if (!is_void(p)) continue;
    ++out.count;
    out.closed += p.kind == PoreKind::closed;
    out.open += p.open;
    out.cut_by_field += p.cut_by_field;
    out.diffuse += p.kind == PoreKind::diffuse;
    out.volume_mm3.value += p.volume_mm3.value;
    variance += p.volume_mm3.standard_uncertainty * p.volume_mm3.standard_uncertainty;
    if (p.open) open += p.volume_mm3.value;
  }
  // Threshold and window errors are common to all pores; noise and level are each pore's own.
  double common = 0;
  for (const Pore& p : m.pores.pores) {
    if (p.left_out || !p.disposition.empty() || !is_void(p)) continue;
    for (const Contribution& c : p.volume_mm3.contributions) {
      if (c.name == "threshold" || c.name == "window") common += c.standard_uncertainty;
    }
  }
  out.volume_mm3.standard_uncertainty = std::sqrt(variance + common * common);
  const double part_mm3 = static_cast<double>(m.part.inside.voxel_count()) * m.geometry.voxel_volume_mm3();
  out.porosity_percent.value = 100 * out.volume_mm3.value / part_mm3;
  out.porosity_percent.standard_uncertainty = 100 * out.volume_mm3.standard_uncertainty / part_mm3;
  out.open_porosity_percent = 100 * open / part_mm3;
  return out;
}

}  // namespace halfmark
