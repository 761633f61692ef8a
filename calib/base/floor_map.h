#pragma once

#include <optional>

#include "calib/base/geometry.h"

namespace rondel {

/// Pixels to floor and back: what every user of a calibrated robot needs, whatever model is behind
/// it. Implementations are immutable and may be used from several threads at once.
class FloorMap {
 public:
  FloorMap() = default;
  FloorMap(const FloorMap&) = default;
  FloorMap(FloorMap&&) = default;
  FloorMap& operator=(const FloorMap&) = default;
  FloorMap& operator=(FloorMap&&) = default;
  virtual ~FloorMap() = default;

  /// The place, `height_m` above the floor, that pixel `at` shows. No answer where the pixel shows
  /// no such place (beyond the horizon, in the mirror's hole, beyond the rim).
  [[nodiscard]] virtual std::optional<FloorSpot> floor_at(ImagePoint at, double height_m) const = 0;

  /// Where a place `height_m` above the floor appears. No answer where it cannot be seen; whether
  /// the robot's own body hides it is the mask's business, not the map's.
  [[nodiscard]] virtual std::optional<ImagePoint> pixel_of(FloorSpot spot,
                                                           double height_m) const = 0;
};

}  // namespace rondel
