#pragma once

#include <array>
#include <cstddef>
#include <memory>
#include <optional>
#include <span>
#include <string_view>
#include <vector>

#include "calib/base/floor_map.h"
#include "calib/base/geometry.h"
#include "calib/optics/rig.h"

namespace rondel::verdict {

// Adding a way in which a robot can be knocked: 1 add it to KnockKind, 2 describe it in kKnocks,
// 3 say in both models of knocks.cc what it does, 4 say in causes.cc what to do about it; the tests
// run over all of them.
enum class KnockKind { centre, tilt, eye_height, focal, mirror, heading, count };

/// What is known of a knock before any data.
struct KnockInfo {
  KnockKind kind;
  std::string_view id;            ///< "centre", in files
  std::string_view cause;         ///< "Centre moved"
  int amounts;                    ///< how many numbers say how far
  std::array<double, 2> typical;  ///< a knock just worth noticing, in the amounts' own units
};

/// Amounts: centre du, dv (px, the whole picture moves by them); tilt of the mirror's axis along u
/// and v (rad); eye height (m); focal length (relative); mirror's vertex radius (relative) and
/// conic constant; heading (rad, added to every bearing that a pixel shows).
inline constexpr std::array<KnockInfo, static_cast<std::size_t>(KnockKind::count)> kKnocks = {{
    {KnockKind::centre, "centre", "Centre moved", 2, {1.0, 1.0}},
    {KnockKind::tilt, "tilt", "Mirror tilted", 2, {0.006, 0.006}},
    {KnockKind::eye_height, "eye_height", "Eye height changed", 1, {0.004, 0.0}},
    {KnockKind::focal, "focal", "Focus or zoom changed", 1, {0.01, 0.0}},
    {KnockKind::mirror, "mirror", "Mirror exchanged", 2, {0.02, 0.1}},
    {KnockKind::heading, "heading", "Heading turned", 1, {0.02, 0.0}},
}};
[[nodiscard]] constexpr const KnockInfo& info_of(KnockKind kind) {
  return kKnocks[static_cast<std::size_t>(kind)];
}

/// A calibrated robot and what every knock would do to its picture. Immutable.
class KnockModel {
 public:
  KnockModel() = default;
  KnockModel(const KnockModel&) = delete;
  KnockModel& operator=(const KnockModel&) = delete;
  virtual ~KnockModel() = default;

  /// Where the knocked robot sees a place; amounts all 0 is the calibrated robot. No answer where
  /// it does not see it.
  [[nodiscard]] virtual std::optional<ImagePoint> pixel_of(
      FloorSpot spot, double height_m, KnockKind kind, std::span<const double> amounts) const = 0;

  /// Independent directions in which the calibration itself is uncertain.
  [[nodiscard]] virtual int modes() const { return 0; }
  /// Where the place would be seen were the calibration off by one standard deviation of a mode.
  [[nodiscard]] virtual std::optional<ImagePoint> pixel_in_mode(FloorSpot spot,
                                                                double height_m,
                                                                int mode) const = 0;
};

/// Knocks of a robot whose geometry is known. `modes`: the rig moved by one standard deviation
/// along each independent direction of its uncertainty.
[[nodiscard]] std::unique_ptr<KnockModel> knocks_of_rig(
    optics::RigGeometry<double> rig, std::vector<optics::RigGeometry<double>> modes);

/// Applies a knock to a rig. Every amount acts as its kind says.
[[nodiscard]] optics::RigGeometry<double> knocked(optics::RigGeometry<double> rig,
                                                  KnockKind kind,
                                                  std::span<const double> amounts);

/// Knocks of a robot of which only the map from pixels to floor is known, taken for a single
/// viewpoint `eye_height_m` above the floor: tilts turn the sphere of directions by twice their
/// angle, a higher eye sees the floor smaller in proportion, the mirror's shape moves radii by a
/// cubic. `modes` are maps as above; the maps must outlive the model.
[[nodiscard]] std::unique_ptr<KnockModel> knocks_of_map(const FloorMap& map,
                                                        ImagePoint centre,
                                                        double eye_height_m,
                                                        std::vector<const FloorMap*> modes);

}  // namespace rondel::verdict
