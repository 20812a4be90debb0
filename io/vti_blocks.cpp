#include "io/vti_blocks.h"

#include <algorithm>
#include <charconv>
#include <fstream>
#include <vector>

#include "io/file_volume.h"
#include "io/problem.h"

namespace halfmark {
namespace fs = std::filesystem;

namespace {

// A tensor of doubles a voxel, and room for a last block that is not full.
constexpr std::uint64_t most_bytes_per_voxel = 72, block_margin = 1 << 20;

// The value of name="..." in a tag.
std::string attribute(const std::string& tag, const std::string& name) {
  const std::string mark = " " + name + "=\"";
  const std::size_t at = tag.find(mark);
  if (at == std::string::npos) return "";
  const std::size_t begin = at + mark.size();
  return tag.substr(begin, tag.find('"', begin) - begin);
}

std::string tag_at(const std::string& head, std::size_t at) {
  std::string tag = at == std::string::npos ? "" : head.substr(at, head.find('>', at) - at);
  for (char& c : tag) c = c == '\n' || c == '\t' || c == '\r' ? ' ' : c;
  return tag;
}

std::string unpacked_base64(const std::string& text) {
  std::string out;
  std::uint32_t bits = 0;
  int count = 0;
  for (const char c : text) {
    const int value = c >= 'A' && c <= 'Z'   ? c - 'A'
                      : c >= 'a' && c <= 'z' ? c - 'a' + 26
                      : c >= '0' && c <= '9' ? c - '0' + 52
                      : c == '+'             ? 62
                      : c == '/'             ? 63
                                             : -1;
    if (value < 0) break;
    bits = (bits << 6) | static_cast<std::uint32_t>(value);
    count += 6;
    if (count >= 8) {
      count -= 8;
      out += static_cast<char>((bits >> count) & 255);
    }
  }
  return out;
}

struct Form {
  std::size_t word = 4;  // bytes of a header number
  bool big_endian = false;
};

// The first `count` numbers of a block header; fewer where the file ends.
std::vector<std::uint64_t> words(std::ifstream& in, std::uint64_t at, std::size_t count, const Form& form,
                                 bool base64) {
  const std::size_t bytes = count * form.word;
  std::string text(base64 ? (bytes + 2) / 3 * 4 : bytes, '\0');
  in.clear();
  in.seekg(static_cast<std::streamoff>(at));
  in.read(text.data(), static_cast<std::streamsize>(text.size()));
  text.resize(static_cast<std::size_t>(std::max<std::streamsize>(in.gcount(), 0)));
  if (base64) text = unpacked_base64(text);
  std::vector<std::uint64_t> out;
  for (std::size_t i = 0; i < count && (i + 1) * form.word <= text.size(); ++i) {
    std::uint64_t value = 0;
    for (std::size_t b = 0; b < form.word; ++b) {
      const std::size_t place = form.big_endian ? b : form.word - 1 - b;
      value = (value << 8) | static_cast<unsigned char>(text[i * form.word + place]);
    }
    out.push_back(value);
  }
  return out;
}

void check_array(std::ifstream& in, std::uint64_t at, const Form& form, bool base64, std::uint64_t most_bytes,
                 const fs::path& file) {
  const std::uint64_t file_bytes = fs::file_size(file);
  const auto refuse = [&] {
    refuse_file(file, "its packed data claim more than the file holds; it is damaged");
  };
  const auto start = words(in, at, 3, form, base64);
  if (start.size() < 3) return refuse();
  const std::uint64_t blocks = start[0], size = start[1], last = start[2];
  if (blocks == 0) return;
  if (size == 0 || size > most_bytes || last > size || blocks > most_bytes / size + 1 ||
      blocks > file_bytes / form.word)
    return refuse();
  const auto all = words(in, at, 3 + static_cast<std::size_t>(blocks), form, base64);
  if (all.size() < 3 + blocks) return refuse();
  if (std::any_of(all.begin() + 3, all.end(), [&](std::uint64_t packed) { return packed > file_bytes; }))
    return refuse();
}

}  // namespace

void check_packed_blocks(const fs::path& file, const std::string& head, std::int64_t voxels) {
  const std::string root = tag_at(head, head.find("<VTKFile"));
  if (attribute(root, "compressor").empty()) return;
  Form form;
  form.word = attribute(root, "header_type") == "UInt64" ? 8 : 4;
  form.big_endian = attribute(root, "byte_order") == "BigEndian";
  const std::size_t appended = head.find("<AppendedData");
  const bool appended_base64 = attribute(tag_at(head, appended), "encoding") != "raw";
  const std::size_t mark =
      appended == std::string::npos ? std::string::npos : head.find('_', head.find('>', appended));
  const std::uint64_t most_bytes = static_cast<std::uint64_t>(voxels) * most_bytes_per_voxel + block_margin;
  std::ifstream in(file, std::ios::binary);
  for (std::size_t at = head.find("<DataArray"); at < std::min(appended, head.size());
       at = head.find("<DataArray", at + 1)) {
    const std::string tag = tag_at(head, at), format = attribute(tag, "format");
    if (format == "appended" && mark != std::string::npos) {
      const std::string text = attribute(tag, "offset");
      std::uint64_t offset = 0;
      std::from_chars(text.data(), text.data() + text.size(), offset);
      if (offset > fs::file_size(file))
        refuse_file(file, "an array begins behind the file's end; it is truncated");
      check_array(in, mark + 1 + offset, form, appended_base64, most_bytes, file);
    } else if (format == "binary") {
      const std::size_t data = head.find_first_not_of(" \n\r\t", head.find('>', at) + 1);
      if (data != std::string::npos) check_array(in, data, form, true, most_bytes, file);
    }
  }
}

}  // namespace halfmark
