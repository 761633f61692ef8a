#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "calib/base/floor_map.h"

namespace rondel::vision {

/// A stretch of floor that is not seen, along one bearing.
struct HiddenStretch {
  double bearing_rad = 0.0;
  double from_m = 0.0;
  double to_m = 0.0;
};

struct BlindZone {
  std::vector<HiddenStretch> hidden;  ///< by bearing, then by range
  double step_rad = 0.0;              ///< between bearings
  double unseen_radius_m = 0.0;       ///< of the largest circle about the robot with nothing seen
  double seen_from_m = 0.0;           ///< beyond it every bearing has seen floor at least once
};

/// Follows the floor outwards along `bearings` directions to `far_m`, in steps of 1 % of the range
/// and at least 2 mm, and looks where the mask hides it. Beyond what the map covers nothing counts
/// as hidden by the robot; nearer than that, everything is.
[[nodiscard]] BlindZone blind_zone(const cv::Mat& mask,
                                   const FloorMap& map,
                                   int bearings,
                                   double far_m);

}  // namespace rondel::vision
