#pragma once

#include <numbers>

namespace rondel {

inline constexpr double kRadPerDeg = std::numbers::pi / 180.0;
inline constexpr double kDegPerRad = 180.0 / std::numbers::pi;

/// A place in the image. The centre of the top-left pixel is (0, 0); its outer corner (-0.5, -0.5).
struct ImagePoint {
  double u_px = 0.0;  ///< to the right
  double v_px = 0.0;  ///< downwards
  friend constexpr bool operator==(const ImagePoint&, const ImagePoint&) = default;
};

/// A place on the floor (or at a stated height above it) in the robot frame: origin on the floor
/// under the mirror's axis, x forward, y left.
struct FloorPoint {
  double x_m = 0.0;
  double y_m = 0.0;
};

/// The same place as range and bearing: bearing 0 is the robot's forward, counter-clockwise seen
/// from above, in (-pi, pi].
struct FloorSpot {
  double range_m = 0.0;
  double bearing_rad = 0.0;
};

/// `angle_rad` wrapped into (-pi, pi].
[[nodiscard]] double wrap_angle(double angle_rad);

[[nodiscard]] FloorPoint to_point(FloorSpot spot);
[[nodiscard]] FloorSpot to_spot(FloorPoint point);

/// Distance on the floor between two spots, m.
[[nodiscard]] double distance_m(FloorSpot a, FloorSpot b);

}  // namespace rondel
