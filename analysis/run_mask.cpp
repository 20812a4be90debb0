#include "analysis/run_mask.h"

#include <algorithm>
#include <bit>
#include <cstring>

namespace halfmark {

namespace {

// Eight flags (each 0 or 1) as eight bits, the first flag lowest.
std::uint64_t eight_bits(const std::uint8_t* flags) {
  std::uint64_t bytes;
  std::memcpy(&bytes, flags, sizeof bytes);
  return (bytes * 0x0102040810204080ULL) >> 56;
}

std::uint64_t flag_bits(const std::uint8_t* flags, std::int64_t count) {
  std::uint64_t bits = 0;
  std::int64_t i = 0;
  if constexpr (std::endian::native == std::endian::little) {
    for (; i + 8 <= count; i += 8) bits |= eight_bits(flags + i) << i;
  }
  for (; i < count; ++i) bits |= static_cast<std::uint64_t>(flags[i]) << i;
  return bits;
}

}  // namespace

void add_row_of_flags(RunMask& mask, const std::uint8_t* flags, std::int64_t count) {
  std::uint64_t before = 0;  // the flag left of this word
  std::int32_t begin = 0;
  for (std::int64_t x = 0; x < count; x += 64) {
    const std::int64_t width = std::min<std::int64_t>(64, count - x);
    const std::uint64_t bits = flag_bits(flags + x, width);
    std::uint64_t changes = bits ^ ((bits << 1) | before);
    if (width < 64) changes &= (std::uint64_t{1} << width) - 1;
    while (changes != 0) {
      const std::int32_t at = static_cast<std::int32_t>(x + std::countr_zero(changes));
      if (before == 0) {
        begin = at;
      } else {
        mask.add_run({begin, at});
      }
      before ^= 1;
      changes &= changes - 1;
    }
  }
  if (before != 0) mask.add_run({begin, static_cast<std::int32_t>(count)});
  mask.end_row();
}

bool contains(const RunMask& mask, std::int64_t x, std::int64_t y, std::int64_t z) {
  const auto& size = mask.size();
  if (y < 0 || z < 0 || y >= size[1] || z >= size[2]) return false;
  const auto row = mask.row(y, z);
  const auto after = std::upper_bound(row.begin(), row.end(), x,
                                      [](std::int64_t value, const Run& run) { return value < run.begin; });
  return after != row.begin() && x < std::prev(after)->end;
}

}  // namespace halfmark
