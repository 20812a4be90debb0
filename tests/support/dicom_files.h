// DICOM files of one slice (or of many frames), made byte by byte: explicit VR, little endian (PS3.5,
// PS3.10).
#pragma once

#include <algorithm>
#include <cstdint>
#include <cstring>
#include <filesystem>
#include <fstream>
#include <sstream>
#include <string>
#include <vector>

namespace halfmark {

struct DicomSlice {
  int columns = 4, rows = 3, frames = 1, number = 1;
  bool is_signed = false;
  std::string position = "0\\0\\0", orientation = "1\\0\\0\\0\\1\\0", spacing = "0.2\\0.1";  // rows first
  std::string slope, intercept, series = "1.2.3.4", voltage = "160";
  std::vector<std::uint16_t> voxels;  // as stored; empty: 0, 1, 2 ...
};

inline std::string dicom_bytes(const DicomSlice& slice) {
  std::string out;
  const auto put16 = [](std::string& to, std::uint32_t v) {
    to += static_cast<char>(v & 255);
    to += static_cast<char>((v >> 8) & 255);
  };
  const auto put32 = [&](std::string& to, std::uint32_t v) {
    put16(to, v & 0xffff);
    put16(to, v >> 16);
  };
  const auto element = [&](std::string& to, std::uint32_t group, std::uint32_t tag, const char* vr,
                           std::string value) {
    if (value.size() % 2 == 1) value += std::string(vr) == "UI" ? '\0' : ' ';
    put16(to, group);
    put16(to, tag);
    to += vr;
    if (std::string(vr) == "OB" || std::string(vr) == "OW") {
      put16(to, 0);
      put32(to, static_cast<std::uint32_t>(value.size()));
    } else {
      put16(to, static_cast<std::uint32_t>(value.size()));
    }
    to += value;
  };
  const auto number = [&](int v) {
    std::string two;
    put16(two, static_cast<std::uint32_t>(v));
    return two;
  };
  const std::string ct_image = "1.2.840.10008.5.1.4.1.1.2",
                    instance = slice.series + "." + std::to_string(slice.number);
  std::string meta;
  element(meta, 2, 0x0001, "OB", std::string("\0\1", 2));
  element(meta, 2, 0x0002, "UI", ct_image);
  element(meta, 2, 0x0003, "UI", instance);
  element(meta, 2, 0x0010, "UI", "1.2.840.10008.1.2.1");
  out.assign(128, '\0');
  out += "DICM";
  std::string length;
  put32(length, static_cast<std::uint32_t>(meta.size()));
  element(out, 2, 0x0000, "UL", length);
  out += meta;
  element(out, 8, 0x0016, "UI", ct_image);
  element(out, 8, 0x0018, "UI", instance);
  element(out, 8, 0x0060, "CS", "CT");
  if (!slice.voltage.empty()) element(out, 0x18, 0x0060, "DS", slice.voltage);
  element(out, 0x20, 0x000d, "UI", "1.2.3");
  element(out, 0x20, 0x000e, "UI", slice.series);
  element(out, 0x20, 0x0013, "IS", std::to_string(slice.number));
  if (!slice.position.empty()) element(out, 0x20, 0x0032, "DS", slice.position);
  if (!slice.orientation.empty()) element(out, 0x20, 0x0037, "DS", slice.orientation);
  element(out, 0x28, 0x0002, "US", number(1));
  element(out, 0x28, 0x0004, "CS", "MONOCHROME2");
  if (slice.frames > 1) element(out, 0x28, 0x0008, "IS", std::to_string(slice.frames));
  element(out, 0x28, 0x0010, "US", number(slice.rows));
  element(out, 0x28, 0x0011, "US", number(slice.columns));
  element(out, 0x28, 0x0030, "DS", slice.spacing);
  element(out, 0x28, 0x0100, "US", number(16));
  element(out, 0x28, 0x0101, "US", number(16));
  element(out, 0x28, 0x0102, "US", number(15));
  element(out, 0x28, 0x0103, "US", number(slice.is_signed ? 1 : 0));
  if (!slice.intercept.empty()) element(out, 0x28, 0x1052, "DS", slice.intercept);
  if (!slice.slope.empty()) element(out, 0x28, 0x1053, "DS", slice.slope);
  std::string voxels;
  for (int i = 0; i < slice.columns * slice.rows * slice.frames; ++i)
    put16(voxels,
          slice.voxels.empty() ? static_cast<std::uint32_t>(i) : slice.voxels[static_cast<std::size_t>(i)]);
  element(out, 0x7fe0, 0x0010, "OW", voxels);
  return out;
}

}  // namespace halfmark
