#include "reports/pore_columns.h"

#include <limits>
#include <string>

#include "analysis/inspection_result.h"

namespace halfmark {

namespace {

struct NumberColumn {
  const char* name;
  double& (*of)(Pore&);
};

constexpr NumberColumn number_columns[] = {
    {"x_mm", [](Pore& p) -> double& { return p.centre_mm[0]; }},
    {"y_mm", [](Pore& p) -> double& { return p.centre_mm[1]; }},
    {"z_mm", [](Pore& p) -> double& { return p.centre_mm[2]; }},
    {"volume_mm3", [](Pore& p) -> double& { return p.volume_mm3.value; }},
    {"volume_standard_uncertainty_mm3", [](Pore& p) -> double& { return p.volume_mm3.standard_uncertainty; }},
    {"equivalent_diameter_mm", [](Pore& p) -> double& { return p.equivalent_diameter_mm; }},
    {"diameter_standard_uncertainty_mm",
     [](Pore& p) -> double& { return p.diameter_standard_uncertainty_mm; }},
    {"length_mm", [](Pore& p) -> double& { return p.length_mm; }},
    {"width_mm", [](Pore& p) -> double& { return p.width_mm; }},
    {"thickness_mm", [](Pore& p) -> double& { return p.thickness_mm; }},
    {"surface_area_mm2", [](Pore& p) -> double& { return p.surface_area_mm2; }},
    {"sphericity", [](Pore& p) -> double& { return p.sphericity; }},
    {"depth_mm", [](Pore& p) -> double& { return p.depth_mm; }},
    {"spacing_mm", [](Pore& p) -> double& { return p.spacing_mm; }},
    {"mean_grey", [](Pore& p) -> double& { return p.mean_grey; }},
    {"contrast", [](Pore& p) -> double& { return p.contrast; }},
};

struct FlagColumn {
  const char* name;
  bool& (*of)(Pore&);
};

constexpr FlagColumn flag_columns[] = {
    {"open", [](Pore& p) -> bool& { return p.open; }},
    {"cut_by_field", [](Pore& p) -> bool& { return p.cut_by_field; }},
};

struct IndexColumn {
  const char* name;
  std::int32_t& (*of)(Pore&);
};

constexpr IndexColumn index_columns[] = {
    {"pore_id", [](Pore& p) -> std::int32_t& { return p.id; }},
    {"nearest_id", [](Pore& p) -> std::int32_t& { return p.nearest_id; }},
    {"min_index_x", [](Pore& p) -> std::int32_t& { return p.min_index[0]; }},
    {"min_index_y", [](Pore& p) -> std::int32_t& { return p.min_index[1]; }},
    {"min_index_z", [](Pore& p) -> std::int32_t& { return p.min_index[2]; }},
    {"max_index_x", [](Pore& p) -> std::int32_t& { return p.max_index[0]; }},
    {"max_index_y", [](Pore& p) -> std::int32_t& { return p.max_index[1]; }},
    {"max_index_z", [](Pore& p) -> std::int32_t& { return p.max_index[2]; }},
};

constexpr PoreKind kinds[] = {PoreKind::closed,     PoreKind::open,    PoreKind::cut_by_field,
                              PoreKind::in_between, PoreKind::diffuse, PoreKind::inclusion};
constexpr ShapeClass shapes[] = {ShapeClass::unclassified, ShapeClass::round, ShapeClass::irregular,
                                 ShapeClass::flat};
constexpr Verdict verdicts[] = {Verdict::accept, Verdict::reject, Verdict::undecided};

template <class F>
Json column_of(const std::vector<Pore>& pores, F&& value) {
  Json::array_t column;
  column.reserve(pores.size());
  for (const Pore& pore : pores) column.emplace_back(value(pore));
  return column;
}

std::vector<JsonPlace> column_items(const JsonPlace& columns, const char* name, std::size_t count) {
  const JsonPlace column = columns.at(name);
  std::vector<JsonPlace> items = column.items();
  if (items.size() != count) column.fail("should have as many entries as pore_id");
  return items;
}

std::int32_t index32(const JsonPlace& place) {
  const std::int64_t value = place.integer();
  if (value < std::numeric_limits<std::int32_t>::min() || value > std::numeric_limits<std::int32_t>::max())
    place.fail("is too large");
  return static_cast<std::int32_t>(value);
}

}  // namespace

Json pores_to_columns(const std::vector<Pore>& pores) {
  Json columns = Json::object();
  // The accessors hand out references to write through as well; here they only read.
  const auto read = [](const Pore& p, auto& (*of)(Pore&)) { return of(const_cast<Pore&>(p)); };
  for (const IndexColumn& c : index_columns)
    columns[c.name] = column_of(pores, [&](const Pore& p) { return read(p, c.of); });
  columns["kind"] = column_of(pores, [](const Pore& p) { return to_text(p.kind); });
  columns["shape_class"] = column_of(pores, [](const Pore& p) { return to_text(p.shape); });
  for (const NumberColumn& c : number_columns)
    columns[c.name] = column_of(pores, [&](const Pore& p) { return read(p, c.of); });
  columns["voxels"] = column_of(pores, [](const Pore& p) { return p.voxels; });
  for (const FlagColumn& c : flag_columns)
    columns[c.name] = column_of(pores, [&](const Pore& p) { return read(p, c.of); });
  columns["zones"] = column_of(pores, [](const Pore& p) { return Json(p.zones); });
  columns["disposition"] = column_of(pores, [](const Pore& p) { return p.disposition; });
  columns["verdict"] = column_of(pores, [](const Pore& p) { return to_text(p.verdict); });
  return columns;
}

std::vector<Pore> pores_from_columns(const JsonPlace& columns) {
  std::vector<Pore> pores(columns.at("pore_id").items().size());
  const auto fill = [&](const char* name, auto&& set) {
    const std::vector<JsonPlace> items = column_items(columns, name, pores.size());
    for (std::size_t i = 0; i < pores.size(); ++i) set(pores[i], items[i]);
  };
  for (const IndexColumn& c : index_columns)
    fill(c.name, [&](Pore& p, const JsonPlace& item) { c.of(p) = index32(item); });
  fill("kind", [](Pore& p, const JsonPlace& item) { p.kind = item.one_of(kinds); });
  fill("shape_class", [](Pore& p, const JsonPlace& item) { p.shape = item.one_of(shapes); });
  for (const NumberColumn& c : number_columns)
    fill(c.name, [&](Pore& p, const JsonPlace& item) { c.of(p) = item.number(); });
  fill("voxels", [](Pore& p, const JsonPlace& item) { p.voxels = item.integer(); });
  for (const FlagColumn& c : flag_columns)
    fill(c.name, [&](Pore& p, const JsonPlace& item) { c.of(p) = item.flag(); });
  fill("zones", [](Pore& p, const JsonPlace& item) { p.zones = item.texts(); });
  fill("disposition", [](Pore& p, const JsonPlace& item) { p.disposition = item.text(); });
  fill("verdict", [](Pore& p, const JsonPlace& item) { p.verdict = item.one_of(verdicts); });
  return pores;
}

}  // namespace halfmark
