#include "io/dispositions.h"

#include <cmath>
#include <fstream>
#include <iterator>
#include <nlohmann/json.hpp>

#include "io/problem.h"

namespace halfmark {

namespace {

using nlohmann::json;

constexpr std::uintmax_t largest_file_bytes = 16u << 20;

[[noreturn]] void refuse(const std::filesystem::path& file, const std::string& place,
                         const std::string& sentence) {
  throw Problem(ExitStatus::bad_data, file.string() + ": " + place + ": " + sentence);
}

double finite_number(const json& value, const std::filesystem::path& file, const std::string& place) {
  if (!value.is_number() || !std::isfinite(value.get<double>())) refuse(file, place, "must be a number");
  return value.get<double>();
}

std::string text(const json& entry, const char* key, const std::filesystem::path& file,
                 const std::string& place) {
  const auto found = entry.find(key);
  if (found == entry.end() || !found->is_string() || found->get<std::string>().empty()) {
    refuse(file, place + "." + key,
           "must be a text that is not empty: an exclusion needs a reason, a name and a time");
  }
  return found->get<std::string>();
}

Disposition read_entry(const json& entry, const std::filesystem::path& file, const std::string& place) {
  if (!entry.is_object()) refuse(file, place, "must be an object");
  Disposition out;
  const auto position = entry.find("position_mm");
  if (position == entry.end() || !position->is_array() || position->size() != 3)
    refuse(file, place + ".position_mm", "must be three numbers in mm");
  for (std::size_t a = 0; a < 3; ++a)
    out.position_mm[a] = finite_number((*position)[a], file, place + ".position_mm");
  out.tolerance_mm = finite_number(entry.value("tolerance_mm", json()), file, place + ".tolerance_mm");
  if (out.tolerance_mm <= 0) refuse(file, place + ".tolerance_mm", "must be above 0");
  out.reason = text(entry, "reason", file, place);
  out.by = text(entry, "by", file, place);
  out.when = text(entry, "when", file, place);
  return out;
}

}  // namespace

std::vector<Disposition> read_dispositions(const std::filesystem::path& file) {
  std::error_code error;
  const auto size = std::filesystem::file_size(file, error);
  if (error) throw Problem(ExitStatus::input_missing, file.string() + ": cannot be read: " + error.message());
  if (size > largest_file_bytes)
    refuse(file, "file", "is larger than 16 MiB; this is not a list of exclusions");
  std::ifstream in(file, std::ios::binary);
  if (!in) throw Problem(ExitStatus::input_missing, file.string() + ": cannot be opened for reading");
  const std::string bytes{std::istreambuf_iterator<char>(in), {}};
  const json root = json::parse(bytes, nullptr, false);
  if (root.is_discarded()) refuse(file, "file", "is not valid JSON");
  if (!root.is_object() || root.value("dispositions_version", json()) != json(1))
    refuse(file, "dispositions_version", "must be 1");
  const auto list = root.find("dispositions");
  if (list == root.end() || !list->is_array()) refuse(file, "dispositions", "must be a list");
  std::vector<Disposition> out;
  for (std::size_t i = 0; i < list->size(); ++i)
    out.push_back(read_entry((*list)[i], file, "dispositions[" + std::to_string(i) + "]"));
  return out;
}

std::string dispositions_to_json(const std::vector<Disposition>& dispositions) {
  nlohmann::ordered_json list = nlohmann::ordered_json::array();
  for (const Disposition& d : dispositions) {
    nlohmann::ordered_json entry;
    entry["position_mm"] = d.position_mm;
    entry["tolerance_mm"] = d.tolerance_mm;
    entry["reason"] = d.reason;
    entry["by"] = d.by;
    entry["when"] = d.when;
    list.push_back(entry);
  }
  nlohmann::ordered_json root;
  root["dispositions_version"] = 1;
  root["dispositions"] = list;
  return root.dump(2, ' ', false, nlohmann::ordered_json::error_handler_t::replace) + "\n";
}

}  // namespace halfmark
