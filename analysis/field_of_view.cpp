// How padding is recognised
//
// Pixels of one and the same value in every plane looked at, which hold a corner of the slices and leave one
// convex piece, may be padding or constant air. Padding ends within one voxel, where a part's surface rises
// over several; and just inside it there is noise or, in a volume without noise, another phase than its own.
// The rule holds for any grey value of the padding, also for one that occurs inside (zero beside clipped
// air).
#include "analysis/field_of_view.h"

#include <algorithm>
#include <cmath>
#include <cstdint>
#include <type_traits>
#include <vector>

#include "analysis/voxel_rows.h"

namespace halfmark {

namespace {

// Planes looked at for columns of one value: enough that noise, even half clipped, leaves none by chance.
constexpr std::int64_t probed_planes = 33;
// Share of field pixels that may be of the padding's value through all planes (chance, dead pixels).
constexpr double stray_share = 0.002;
// A part's surface rises over some voxels, padding ends in one: mean jump of the first field voxel against
// the third.
constexpr double sharp_ratio = 0.75;
// Share of unequal neighbours along the rim from which the field counts as noisy.
constexpr double noisy_share = 0.2;
// Without noise, air is as constant as padding: runs this long of the padding's value within the field, if
// they hold more than this share of it, say that the value is air.
constexpr std::int64_t bulk_run = 16;
constexpr double bulk_share = 0.005;
// Without noise, what is left must show a second phase: share of voxels unlike the rim's.
constexpr double second_phase_share = 0.005;

struct Span {
  std::int64_t begin = 0, end = 0;
};

struct Rim {
  std::vector<std::int64_t> first, third, fourth;  // pixels 1, 3 and 4 inside the field, by in-plane index
};

// Constant planes at either end of the volume.
struct BlankEnds {
  std::int64_t low = 0, high = 0;  // field planes: [low, high)
};

template <class T>
bool is_blank(const T* plane, std::int64_t count) {
  const T value = plane[0];
  return std::all_of(plane, plane + count, [value](T v) { return v == value; });
}

template <class T>
class PaddingSearch {
 public:
  PaddingSearch(const VolumeSource& source, const RunControl& control)
      : source_(source),
        control_(control),
        reader_(source),
        nx_(source.geometry().size[0]),
        ny_(source.geometry().size[1]),
        nz_(source.geometry().size[2]) {}

  FieldOfView find() {
    BlankEnds ends = blank_ends();
    if (ends.low >= ends.high) return whole_field(source_.geometry());  // constant volume
    const bool columns = find_columns(ends) && rim_is_padding(ends);
    if (ends.low > 0 || ends.high < nz_) {
      if (columns && blank_grey_ != grey_) ends = {0, nz_};
      if (!columns && !blank_planes_are_padding(ends)) ends = {0, nz_};
    }
    if (!columns) {
      if (ends.low == 0 && ends.high == nz_) return whole_field(source_.geometry());
      grey_ = blank_grey_;
      spans_.assign(static_cast<std::size_t>(ny_), Span{0, nx_});
    }
    return as_field(ends);
  }

 private:
  const T* plane(std::int64_t z) { return reader_.template planes<T>(z, z + 1); }

  BlankEnds blank_ends() {
    BlankEnds ends{0, nz_};
    const std::int64_t count = nx_ * ny_;
    while (ends.low < nz_) {
      control_.step("field of view", 0);
      const T* p = plane(ends.low);
      if (!is_blank(p, count) || (ends.low > 0 && p[0] != blank_grey_)) break;
      blank_grey_ = p[0];
      ++ends.low;
    }
    while (ends.high > ends.low) {
      control_.step("field of view", 0.1);
      const T* p = plane(ends.high - 1);
      if (!is_blank(p, count) || ((ends.low > 0 || ends.high < nz_) && p[0] != blank_grey_)) break;
      blank_grey_ = p[0];
      --ends.high;
    }
    return ends;
  }

  std::vector<std::int64_t> probes(const BlankEnds& ends) const {
    std::vector<std::int64_t> out;
    const std::int64_t count = std::min(probed_planes, ends.high - ends.low);
    for (std::int64_t i = 0; i < count; ++i) {
      out.push_back(ends.low + (count > 1 ? i * (ends.high - ends.low - 1) / (count - 1) : 0));
    }
    return out;
  }

  // Columns of one grey value that hold a corner of the slices; false unless they leave one run a row and one
  // a column.
  bool find_columns(const BlankEnds& ends) {
    const std::int64_t count = nx_ * ny_;
    if (nx_ < 4 || ny_ < 4) return false;
    const std::vector<std::int64_t> planes = probes(ends);
    const std::int64_t corners[4] = {0, nx_ - 1, count - nx_, count - 1};
    T value[4] = {};
    int votes[4] = {1, 1, 1, 1};
    for (std::size_t i = 0; i < planes.size(); ++i) {
      const T* p = plane(planes[i]);
      for (int k = 0; k < 4; ++k) {
        if (i == 0) value[k] = p[corners[k]];
        if (!(p[corners[k]] == value[k])) votes[k] = 0;
      }
    }
    int best = -1;
    for (int k = 0; k < 4; ++k) {
      if (votes[k] == 0) continue;
      votes[k] = 0;
      for (int m = 0; m < 4; ++m) votes[k] += value[m] == value[k];
      if (best < 0 || votes[k] > votes[best]) best = k;
    }
    if (best < 0) return false;
    grey_ = value[best];
    std::vector<std::uint8_t> padded(static_cast<std::size_t>(count), 1);
    for (std::size_t i = 0; i < planes.size(); ++i) {
      control_.step("field of view", 0.2 + 0.3 * static_cast<double>(i) / static_cast<double>(planes.size()));
      const T* p = plane(planes[i]);
      for (std::int64_t k = 0; k < count; ++k) {
        padded[static_cast<std::size_t>(k)] &= static_cast<std::uint8_t>(p[k] == grey_);
      }
    }
    return keep_convex(padded);
  }

  // Sets spans_ and rim_; false if what the padding leaves has holes or bays.
  bool keep_convex(const std::vector<std::uint8_t>& padded) {
    const auto at = [&](std::int64_t x, std::int64_t y) {
      return padded[static_cast<std::size_t>(y * nx_ + x)];
    };
    spans_.assign(static_cast<std::size_t>(ny_), Span{});
    rim_ = {};
    std::int64_t field = 0, strays = 0;
    const auto scan = [&](std::int64_t length, auto&& pixel_padded, auto&& index) {
      Span span{0, length};
      while (span.begin < length && pixel_padded(span.begin)) ++span.begin;
      while (span.end > span.begin && pixel_padded(span.end - 1)) --span.end;
      for (std::int64_t i = span.begin; i < span.end; ++i) strays += pixel_padded(i);
      if (span.end - span.begin >= 8) {
        if (span.begin > 0) add_rim(index, span.begin, 1);
        if (span.end < length) add_rim(index, span.end - 1, -1);
      }
      return span;
    };
    for (std::int64_t y = 0; y < ny_; ++y) {
      const Span span = scan(
          nx_, [&](std::int64_t x) { return at(x, y); }, [&](std::int64_t x) { return y * nx_ + x; });
      spans_[static_cast<std::size_t>(y)] = span;
      field += span.end - span.begin;
    }
    for (std::int64_t x = 0; x < nx_; ++x) {
      scan(
          ny_, [&](std::int64_t y) { return at(x, y); }, [&](std::int64_t y) { return y * nx_ + x; });
    }
    return field < nx_ * ny_ && !rim_.first.empty() &&
           static_cast<double>(strays) <= 2 * stray_share * static_cast<double>(field);
  }

  template <class Index>
  void add_rim(const Index& index, std::int64_t start, std::int64_t step) {
    rim_.first.push_back(index(start));
    rim_.third.push_back(index(start + 2 * step));
    rim_.fourth.push_back(index(start + 3 * step));
  }

  // The rim is one voxel sharp, and the field differs from the padding by its noise or its phases.
  bool rim_is_padding(const BlankEnds& ends) {
    double jump_first = 0, jump_third = 0, unequal = 0, rims = 0, unlike_rim = 0, in_bulk = 0, voxels = 0;
    const auto centre = static_cast<double>(grey_);
    T rim_grey{};
    bool first_plane = true;
    for (const std::int64_t z : probes(ends)) {
      control_.step("field of view", 0.7);
      const T* p = plane(z);
      if (first_plane) rim_grey = p[rim_.third.front()];
      first_plane = false;
      for (std::size_t i = 0; i < rim_.first.size(); ++i) {
        jump_first += std::abs(static_cast<double>(p[rim_.first[i]]) - centre);
        jump_third += std::abs(static_cast<double>(p[rim_.third[i]]) - centre);
        unequal += p[rim_.third[i]] != p[rim_.fourth[i]];
      }
      rims += static_cast<double>(rim_.first.size());
      for (std::int64_t y = 0; y < ny_; ++y) {
        const Span span = spans_[static_cast<std::size_t>(y)];
        std::int64_t run = 0;
        for (std::int64_t x = span.begin; x < span.end; ++x) {
          const T v = p[y * nx_ + x];
          unlike_rim += v != rim_grey && v != grey_;
          run = v == grey_ ? run + 1 : 0;
          if (run == bulk_run) in_bulk += static_cast<double>(bulk_run);
          if (run > bulk_run) in_bulk += 1;
        }
        voxels += static_cast<double>(span.end - span.begin);
      }
    }
    if (!(jump_first > 0) || !(jump_first >= sharp_ratio * jump_third)) return false;
    if (unequal >= noisy_share * rims) return true;
    return in_bulk <= bulk_share * voxels && unlike_rim >= second_phase_share * voxels;
  }

  // Blank planes at the ends are padding if the next plane is not mostly of their value (as noise-free air
  // around a part would be).
  bool blank_planes_are_padding(const BlankEnds& ends) {
    const auto mostly_blank = [&](std::int64_t z) {
      const T* p = plane(z);
      return 2 * std::count(p, p + nx_ * ny_, blank_grey_) > nx_ * ny_;
    };
    if (ends.low > 0 && mostly_blank(ends.low)) return false;
    return !(ends.high < nz_ && mostly_blank(ends.high - 1));
  }

  FieldOfView as_field(const BlankEnds& ends) const {
    FieldOfView field;
    field.rows = RunMask(source_.geometry().size);
    field.padding_grey = static_cast<double>(grey_);
    for (std::int64_t z = 0; z < nz_; ++z) {
      for (const Span& span : spans_) {
        if (z >= ends.low && z < ends.high && span.end > span.begin) {
          field.rows.add_run({static_cast<std::int32_t>(span.begin), static_cast<std::int32_t>(span.end)});
          field.voxels += span.end - span.begin;
        }
        field.rows.end_row();
      }
    }
    return field;
  }

  const VolumeSource& source_;
  const RunControl& control_;
  SlabReader reader_;
  std::int64_t nx_, ny_, nz_;
  T grey_{}, blank_grey_{};
  std::vector<Span> spans_;
  Rim rim_;
};

}  // namespace

FieldOfView find_field_of_view(const VolumeSource& source, const RunControl& control) {
  return visit_voxel_type(source.voxel_type(), [&](auto* type) {
    using T = std::remove_pointer_t<decltype(type)>;
    return PaddingSearch<T>(source, control).find();
  });
}

FieldOfView whole_field(const VolumeGeometry& geometry) {
  FieldOfView field;
  field.rows = RunMask(geometry.size);
  for (std::int64_t r = 0; r < geometry.size[1] * geometry.size[2]; ++r) {
    field.rows.add_run({0, static_cast<std::int32_t>(geometry.size[0])});
    field.rows.end_row();
  }
  field.voxels = geometry.voxel_count();
  return field;
}

bool cube_in_field(const FieldOfView& field, std::int64_t x, std::int64_t y, std::int64_t z,
                   std::int64_t margin) {
  for (const std::int64_t cz : {z - margin, z + margin}) {
    for (const std::int64_t cy : {y - margin, y + margin}) {
      if (!contains(field.rows, x - margin, cy, cz) || !contains(field.rows, x + margin, cy, cz))
        return false;
    }
  }
  return true;
}

}  // namespace halfmark
