#include "calib/base/geometry.h"

#include <cmath>

namespace rondel {

double wrap_angle(double angle_rad) {
  const double wrapped = std::remainder(angle_rad, 2.0 * std::numbers::pi);
  return wrapped <= -std::numbers::pi ? std::numbers::pi : wrapped;
}

FloorPoint to_point(FloorSpot spot) {
  return {spot.range_m * std::cos(spot.bearing_rad), spot.range_m * std::sin(spot.bearing_rad)};
}

FloorSpot to_spot(FloorPoint point) {
  return {std::hypot(point.x_m, point.y_m), wrap_angle(std::atan2(point.y_m, point.x_m))};
}

double distance_m(FloorSpot a, FloorSpot b) {
  const FloorPoint p = to_point(a);
  const FloorPoint q = to_point(b);
  return std::hypot(p.x_m - q.x_m, p.y_m - q.y_m);
}

}  // namespace rondel
