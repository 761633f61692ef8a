#pragma once

#include <optional>

#include "calib/base/floor_map.h"
#include "calib/optics/trace.h"

namespace rondel::link::testing {

/// A rig's exact trace as a FloorMap.
class RigMap : public FloorMap {
 public:
  explicit RigMap(const optics::RigGeometry<double>& rig) : rig_(rig) {}
  [[nodiscard]] std::optional<FloorSpot> floor_at(ImagePoint at, double height_m) const override {
    const auto floor = optics::pixel_to_floor(rig_, at.u_px, at.v_px, height_m);
    if (!floor) return std::nullopt;
    return to_spot({floor->x_m, floor->y_m});
  }
  [[nodiscard]] std::optional<ImagePoint> pixel_of(FloorSpot spot, double height_m) const override {
    const FloorPoint place = to_point(spot);
    const auto at = optics::floor_to_pixel(rig_, place.x_m, place.y_m, height_m);
    if (!at) return std::nullopt;
    return ImagePoint{at->u_px, at->v_px};
  }

 private:
  optics::RigGeometry<double> rig_;
};

}  // namespace rondel::link::testing
