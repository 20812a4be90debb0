#include "io/dicom_file.h"

#include <algorithm>
#include <charconv>
#include <cmath>
#include <cstring>
#include <fstream>
#include <set>
#include <utility>

#include "io/file_volume.h"
#include "io/problem.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

using Tag = std::uint32_t;  // group, element

constexpr std::uint32_t undefined_length = 0xffffffff;
constexpr int deepest_sequence = 16;
constexpr std::uint32_t longest_value = 4096;       // of what is read here
constexpr std::size_t most_occurrences = 1u << 20;  // positions of frames

constexpr Tag transfer_syntax = 0x00020010, pixel_data = 0x7fe00010, float_pixel_data = 0x7fe00008,
              series_uid = 0x0020000e, instance_number = 0x00200013, position = 0x00200032,
              orientation = 0x00200037, samples = 0x00280002, photometric = 0x00280004, frames = 0x00280008,
              rows = 0x00280010, columns = 0x00280011, pixel_spacing = 0x00280030,
              bits_allocated = 0x00280100, bits_stored = 0x00280101, high_bit = 0x00280102,
              representation = 0x00280103, rescale_intercept = 0x00281052, rescale_slope = 0x00281053,
              slice_thickness = 0x00180050, spacing_between_slices = 0x00180088,
              imager_pixel_spacing = 0x00181164;

const std::map<Tag, const char*>& scan_tags() {
  static const std::map<Tag, const char*> names{
      {0x00180060, "voltage_kv"},         {0x00181151, "current_ma"},       {0x00181150, "exposure_ms"},
      {0x00181110, "source_detector_mm"}, {0x00181111, "source_object_mm"}, {0x00181160, "filter"}};
  return names;
}

bool is_wanted(Tag tag) {
  static const std::set<Tag> wanted{transfer_syntax,
                                    series_uid,
                                    instance_number,
                                    position,
                                    orientation,
                                    samples,
                                    photometric,
                                    frames,
                                    rows,
                                    columns,
                                    pixel_spacing,
                                    bits_allocated,
                                    bits_stored,
                                    high_bit,
                                    representation,
                                    rescale_slope,
                                    slice_thickness,
                                    spacing_between_slices,
                                    imager_pixel_spacing,
                                    rescale_intercept};
  return wanted.count(tag) > 0 || scan_tags().count(tag) > 0;
}

// Sequences that hold a multi-frame picture's geometry (PS3.3, C.7.6.16); the implicit form does not mark
// them.
bool is_frame_sequence(Tag tag) {
  return tag == 0x52009229 || tag == 0x52009230 || tag == 0x00289110 || tag == 0x00209113 ||
         tag == 0x00209116 || tag == 0x00289145;
}

bool has_long_length(const char* vr) {
  static const std::set<std::string> names{"OB", "OW", "OF", "OD", "OL", "OV", "SQ",
                                           "UT", "UN", "UC", "UR", "SV", "UV"};
  return names.count(std::string(vr, 2)) > 0;
}

class Parser {
 public:
  explicit Parser(const fs::path& file)
      : file_(file), in_(file, std::ios::binary), size_(fs::file_size(file)) {}

  std::map<Tag, std::vector<std::string>> values;
  std::uint64_t voxel_offset = 0, voxel_bytes = 0;
  bool encapsulated = false, float_voxels = false;

  void parse() {
    in_.seekg(132);
    at_ = 132;
    parse_elements(size_, true, 0, true);
    const std::string syntax = text(transfer_syntax);
    const bool is_explicit = syntax != "1.2.840.10008.1.2";
    if (syntax == "1.2.840.10008.1.2.2" || syntax == "1.2.840.10008.1.2.1.99")
      refuse_file(file_, "is a big-endian or deflated DICOM file, which is not read; export little endian");
    parse_elements(size_, is_explicit, 0, false);
    if (voxel_offset == 0)
      refuse_file(file_, "is a DICOM file without a picture; it is truncated or no slice");
  }

  std::string text(Tag tag) const {
    const auto found = values.find(tag);
    return found == values.end() ? "" : found->second.front();
  }

 private:
  [[noreturn]] void cut_off() const {
    refuse_file(file_, "is truncated or damaged: a DICOM element is cut off");
  }

  std::uint32_t number(int bytes) {
    unsigned char raw[4] = {};
    if (size_ - at_ < static_cast<std::uint64_t>(bytes) || !in_.read(reinterpret_cast<char*>(raw), bytes))
      cut_off();
    at_ += static_cast<std::uint64_t>(bytes);
    return raw[0] | (std::uint32_t{raw[1]} << 8) | (std::uint32_t{raw[2]} << 16) |
           (std::uint32_t{raw[3]} << 24);
  }
  Tag tag() {
    const std::uint32_t group = number(2);
    return (group << 16) | number(2);
  }
  void go_to(std::uint64_t offset) {
    at_ = offset;
    in_.seekg(static_cast<std::streamoff>(offset));
  }

  // `meta`: the file meta group 0002 only, which is always explicit. Ends at `end`, at a delimiter, or with
  // the voxels.
  void parse_elements(std::uint64_t end, bool is_explicit, int depth, bool meta) {
    while (at_ < end && voxel_offset == 0) {
      const std::uint64_t start = at_;
      const Tag name = tag();
      if (meta && name >> 16 != 2) return go_to(start);
      if (name == 0xfffee00d || name == 0xfffee0dd) {  // end of an item, of a sequence
        number(4);
        return;
      }
      bool is_sequence = !is_explicit && is_frame_sequence(name), is_unknown = false;
      std::uint32_t length = 0;
      if (is_explicit) {
        const std::uint32_t letters = number(2);
        const char vr[2] = {static_cast<char>(letters & 255), static_cast<char>(letters >> 8)};
        if (vr[0] < 'A' || vr[0] > 'Z' || vr[1] < 'A' || vr[1] > 'Z')
          refuse_file(file_, "is damaged: a DICOM element without a type");
        if (has_long_length(vr)) number(2);
        length = number(has_long_length(vr) ? 4 : 2);
        is_sequence = vr[0] == 'S' && vr[1] == 'Q';
        is_unknown = vr[0] == 'U' && vr[1] == 'N';  // its content, if any, is in the implicit form
      } else {
        length = number(4);
      }
      if (depth == 0 && (name == pixel_data || name == float_pixel_data)) return take_voxels(name, length);
      if (name == pixel_data && length == undefined_length) {  // a thumbnail's
        skip_fragments();
        continue;
      }
      if (length == undefined_length || is_sequence) {
        const bool outer = std::exchange(passing_over_, passing_over_ || !is_frame_sequence(name));
        parse_sequence(length, is_explicit && !is_unknown, depth + 1);
        passing_over_ = outer;
        continue;
      }
      if (length > end - std::min(at_, end)) cut_off();
      take_value(name, length);
    }
    if (at_ > end) cut_off();
  }

  void parse_sequence(std::uint32_t length, bool is_explicit, int depth) {
    if (depth > deepest_sequence) refuse_file(file_, "is damaged: its DICOM sequences are nested too deeply");
    if (length != undefined_length && length > size_ - at_) cut_off();
    const std::uint64_t end = length == undefined_length ? size_ : at_ + length;
    while (at_ < end) {
      const Tag name = tag();
      const std::uint32_t bytes = number(4);
      if (name == 0xfffee0dd) return;
      if (name != 0xfffee000) refuse_file(file_, "is damaged: a DICOM sequence without items");
      if (bytes != undefined_length && bytes > size_ - at_) cut_off();
      parse_elements(bytes == undefined_length ? size_ : at_ + bytes, is_explicit, depth, false);
    }
  }

  void take_value(Tag name, std::uint32_t length) {
    const std::uint64_t next = at_ + length;
    if (!passing_over_ && is_wanted(name) && length <= longest_value) {
      std::string value(length, '\0');
      if (length > 0 && !in_.read(value.data(), length)) cut_off();
      while (!value.empty() && (name >> 16 != 0x28 || length > 2) &&
             (value.back() == ' ' || value.back() == '\0'))
        value.pop_back();
      auto& all = values[name];
      if (all.size() < most_occurrences) all.push_back(std::move(value));
    }
    go_to(next);
  }

  void skip_fragments() {
    for (;;) {
      const Tag item = tag();
      const std::uint32_t bytes = number(4);
      if (item == 0xfffee0dd) return;
      if (item != 0xfffee000 || bytes > size_ - at_) cut_off();
      go_to(at_ + bytes);
    }
  }

  void take_voxels(Tag name, std::uint32_t length) {
    float_voxels = name == float_pixel_data;
    encapsulated = length == undefined_length;
    if (!encapsulated && length > size_ - at_)
      refuse_file(file_, "promises more voxels than the file holds; it is truncated");
    const std::uint64_t start = at_;
    if (encapsulated) skip_fragments();
    voxel_offset = start;
    voxel_bytes = encapsulated ? at_ - start : length;
  }

  fs::path file_;
  std::ifstream in_;
  std::uint64_t size_, at_ = 0;
  bool passing_over_ = false;  // in a sequence that is not about the frames
};

std::vector<double> numbers(const std::string& text) {
  std::vector<double> out;
  const char *at = text.data(), *end = text.data() + text.size();
  while (at < end) {
    while (at < end && (*at == ' ' || *at == '+')) ++at;
    double value = 0;
    const auto [next, error] = std::from_chars(at, end, value);
    out.push_back(error == std::errc() ? value : std::nan(""));
    at = std::find(next, end, '\\');
    if (at < end) ++at;
  }
  return out;
}

double number_or(const std::string& text, double otherwise) {
  const auto all = numbers(text);
  return all.empty() ? otherwise : all.front();
}

// An unsigned short (US) of the header.
int short_or(const Parser& parser, Tag tag, int otherwise) {
  const std::string text = parser.text(tag);
  if (text.size() < 2) return otherwise;
  return static_cast<unsigned char>(text[0]) | (static_cast<unsigned char>(text[1]) << 8);
}

void read_picture(const Parser& parser, DicomFile& out) {
  const std::string kind = parser.text(photometric);
  if (short_or(parser, samples, 1) != 1 || kind.rfind("MONOCHROME", 0) != 0)
    refuse_file(out.path, "holds colour pictures; a grey-value volume has one value a voxel");
  out.rows = short_or(parser, rows, 0);
  out.columns = short_or(parser, columns, 0);
  const double count = number_or(parser.text(frames), 1);
  out.frames = count >= 1 && count <= 1 << 20 ? static_cast<std::int64_t>(count) : 0;
  out.bits_allocated = short_or(parser, bits_allocated, 0);
  out.bits_stored = short_or(parser, bits_stored, out.bits_allocated);
  out.high_bit = short_or(parser, high_bit, out.bits_stored - 1);
  out.is_signed = short_or(parser, representation, 0) == 1;
  out.is_float = parser.float_voxels;
  if (out.rows < 1 || out.columns < 1 || out.frames < 1)
    refuse_file(out.path, "has no rows, columns or frames; the file is damaged");
  const bool known_bits =
      out.is_float ? out.bits_allocated == 32
                   : out.bits_allocated == 8 || out.bits_allocated == 16 || out.bits_allocated == 32;
  const bool sound_bits = out.is_float || (out.bits_stored >= 1 && out.high_bit < out.bits_allocated &&
                                           out.high_bit >= out.bits_stored - 1);
  if (!known_bits || !sound_bits)
    refuse_file(out.path, "voxels of " + std::to_string(out.bits_allocated) +
                              " bits in this form are not read; export 8- or 16-bit integers");
  out.slope = number_or(parser.text(rescale_slope), 1);
  out.intercept = number_or(parser.text(rescale_intercept), 0);
  if (!std::isfinite(out.slope) || out.slope == 0 || !std::isfinite(out.intercept))
    refuse_file(out.path, "its rescale slope or intercept is no number; the file is damaged");
}

void read_place(const Parser& parser, DicomFile& out) {
  if (const auto axes = numbers(parser.text(orientation)); axes.size() == 6) {
    out.row_direction = unit({axes[0], axes[1], axes[2]});
    out.column_direction = unit({axes[3], axes[4], axes[5]});
  }
  auto spacing = numbers(parser.text(pixel_spacing));
  if (spacing.size() != 2) spacing = numbers(parser.text(imager_pixel_spacing));
  if (spacing.size() == 2) {
    out.spacing_mm = {spacing[1], spacing[0]};
    out.has_spacing = true;
  }
  for (const Tag tag : {spacing_between_slices, slice_thickness}) {
    const double value = std::abs(number_or(parser.text(tag), 0));
    if (!out.slice_spacing_mm && std::isfinite(value) && value > 0) out.slice_spacing_mm = value;
  }
  const auto found = parser.values.find(position);
  if (found == parser.values.end()) return;
  for (const std::string& text : found->second) {
    const auto p = numbers(text);
    if (p.size() != 3 || !std::isfinite(p[0] + p[1] + p[2]))
      refuse_file(out.path, "its position is not three numbers; the file is damaged");
    out.positions_mm.push_back({p[0], p[1], p[2]});
  }
}

}  // namespace

std::array<double, 2> DicomFile::grey_range() const {
  const double span = std::ldexp(1.0, bits_stored), low = is_signed ? -span / 2 : 0, high = low + span - 1;
  const double a = low * slope + intercept, b = high * slope + intercept;
  return {std::min(a, b), std::max(a, b)};
}

bool is_dicom_file(const fs::path& file) {
  std::ifstream in(file, std::ios::binary);
  char head[132] = {};
  in.read(head, sizeof head);
  return in.gcount() == sizeof head && std::memcmp(head + 128, "DICM", 4) == 0;
}

DicomFile read_dicom_header(const fs::path& file) {
  if (!is_dicom_file(file)) refuse_file(file, "is no DICOM file: its mark DICM is missing");
  Parser parser(file);
  parser.parse();
  DicomFile out;
  out.path = file;
  out.series = parser.text(series_uid);
  const double number = number_or(parser.text(instance_number), 0);
  out.number = std::abs(number) < 1e9 ? static_cast<long>(number) : 0;
  read_picture(parser, out);
  read_place(parser, out);
  out.compressed = parser.encapsulated;
  out.voxel_offset = parser.voxel_offset;
  out.voxel_bytes = parser.voxel_bytes;
  if (!out.compressed && out.voxel_bytes / static_cast<std::uint64_t>(out.frames) < out.frame_bytes())
    refuse_file(file, "promises more voxels than the file holds; it is truncated or damaged");
  for (const auto& [tag, name] : scan_tags()) {
    if (const std::string value = parser.text(tag); !value.empty()) out.scan[name] = value;
  }
  return out;
}

}  // namespace halfmark
