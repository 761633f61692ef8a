#include "vision/mask/blind_zone.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numbers>

namespace rondel::vision {
namespace {

enum class Sight { seen, hidden, off_map };

Sight sight(const cv::Mat& mask, const FloorMap& map, FloorSpot spot) {
  const auto at = map.pixel_of(spot, 0.0);
  if (!at) return Sight::off_map;
  const int u = static_cast<int>(std::lround(at->u_px));
  const int v = static_cast<int>(std::lround(at->v_px));
  if (u < 0 || v < 0 || u >= mask.cols || v >= mask.rows) return Sight::off_map;
  return mask.at<std::uint8_t>(v, u) != 0 ? Sight::seen : Sight::hidden;
}

}  // namespace

BlindZone blind_zone(const cv::Mat& mask, const FloorMap& map, int bearings, double far_m) {
  BlindZone zone;
  zone.step_rad = 2.0 * std::numbers::pi / bearings;
  zone.unseen_radius_m = std::numeric_limits<double>::infinity();
  for (int k = 0; k < bearings; ++k) {
    const double bearing = wrap_angle(k * zone.step_rad);
    bool hidden = true;  // the robot stands on its own foot
    bool met = false;
    double from = 0.0;
    double last = 0.0;
    double first_seen = far_m;
    for (double range = 0.005; range <= far_m; range += std::max(0.002, 0.01 * range)) {
      const Sight now = sight(mask, map, {range, bearing});
      if (now == Sight::off_map && met) break;
      if (now == Sight::seen && hidden) {
        zone.hidden.push_back({bearing, from, range});
        first_seen = std::min(first_seen, range);
        hidden = false;
      } else if (now == Sight::hidden && !hidden) {
        from = range;
        hidden = true;
      }
      met = met || now != Sight::off_map;
      last = range;
    }
    if (hidden) zone.hidden.push_back({bearing, from, last});
    zone.unseen_radius_m = std::min(zone.unseen_radius_m, first_seen);
    zone.seen_from_m = std::max(zone.seen_from_m, first_seen);
  }
  std::stable_sort(
      zone.hidden.begin(), zone.hidden.end(), [](const HiddenStretch& a, const HiddenStretch& b) {
        return a.bearing_rad < b.bearing_rad;
      });
  return zone;
}

}  // namespace rondel::vision
