// Puts a demo part together: a body, cavities, inclusions and debris go in, in the part's own frame; the
// scanned bodies, the spec and the truth come out, in the volume's frame. A real part never stands straight
// in the scanner, so the part is turned a little.
#pragma once

#include <array>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "demo_volumes/demo_part.h"

namespace halfmark {

using Json = nlohmann::ordered_json;

// A volume of this size (mm) that begins at 0, with voxels of 0.1 mm / scale.
VolumeGeometry demo_geometry(const Vec3& size_mm, int scale);

class PartBuilder {
 public:
  PartBuilder(std::string name, const VolumeGeometry& geometry, const Vec3& turn_axis, double turn_degrees);

  // Everything below in the part's frame, mm. The body comes first.
  void body(const SolidPtr& solid);
  void gas_pore(const Vec3& centre_mm, double diameter_mm);
  // kind: "shrinkage", "open", ...; only what lies within the body counts.
  void cavity(const std::string& kind, const SolidPtr& solid);
  void inclusion(const SolidPtr& solid, double grey_share);
  void debris(const SolidPtr& solid);
  void wall(const std::string& what, double thickness_mm, const Vec3& place_mm);

  Vec3 placed(const Vec3& mm) const;  // a place of the part in the volume
  double pore_volume_mm3() const { return pore_volume_mm3_; }
  double enclosed_volume_mm3() const { return enclosed_mm3_; }                        // pores filled
  double porosity_percent() const { return 100 * pore_volume_mm3_ / enclosed_mm3_; }  // overlap-free
  double open_porosity_percent() const { return 100 * open_volume_mm3_ / enclosed_mm3_; }
  double largest_pore_mm() const { return largest_pore_mm_; }

  // What inspect must answer. The value may differ from the truth by `tolerance` at most; 0: not compared.
  void expect(const std::string& id, const std::string& verdict, double value, double tolerance,
              const std::string& unit, const std::string& reason);

  DemoPart finish(const std::string& verdict, const Json& spec, const ScanModel& scan);

 private:
  SolidPtr placed(const SolidPtr& solid) const;
  void list_pore(const std::string& kind, const Vec3& centre_mm, double volume_mm3);

  DemoPart part_;
  std::array<double, 9> turn_;
  Vec3 middle_{};
  SolidPtr body_;
  double enclosed_mm3_ = 0, pore_volume_mm3_ = 0, open_volume_mm3_ = 0, largest_pore_mm_ = 0;
  Json pores_ = Json::array(), inclusions_ = Json::array(), debris_ = Json::array(), walls_ = Json::array(),
       requirements_ = Json::array();
};

// A scan as good as everyday ones: blur 0.8 voxel, contrast-to-noise 15, slightly correlated noise, cupping 7
// %.
ScanModel everyday_scan(std::uint64_t seed);

// All places below the plane through `place` with this outward normal, as a box of the given reach.
SolidPtr below_plane(const Vec3& place_mm, const Vec3& normal, double reach_mm);

// Many small balls and bars grown from the middle of an ellipsoid, each from an earlier one: the branched
// cavity that shrinkage leaves. Stays within the ellipsoid.
SolidPtr shrinkage_cavity(const Vec3& centre_mm, const Vec3& semi_axes_mm, int branches, std::uint64_t seed);

// Numbers in [0, 1) that are the same with every standard library.
class DemoRandom {
 public:
  explicit DemoRandom(std::uint64_t seed) : state_(seed) {}
  double operator()();
  double operator()(double low, double high) { return low + (high - low) * (*this)(); }

 private:
  std::uint64_t state_;
};

std::string in_words(double value, int decimals, const std::string& unit);  // "0.87 %"

}  // namespace halfmark
