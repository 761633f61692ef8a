#include "calib/verdict/knocks.h"

#include <cmath>
#include <utility>

#include "calib/optics/trace.h"

namespace rondel::verdict {
namespace {

class RigKnocks final : public KnockModel {
 public:
  RigKnocks(optics::RigGeometry<double> rig, std::vector<optics::RigGeometry<double>> modes)
      : rig_(std::move(rig)), modes_(std::move(modes)) {}

  [[nodiscard]] std::optional<ImagePoint> pixel_of(FloorSpot spot,
                                                   double height_m,
                                                   KnockKind kind,
                                                   std::span<const double> amounts) const override {
    return seen(knocked(rig_, kind, amounts), spot, height_m);
  }
  [[nodiscard]] int modes() const override { return static_cast<int>(modes_.size()); }
  [[nodiscard]] std::optional<ImagePoint> pixel_in_mode(FloorSpot spot,
                                                        double height_m,
                                                        int mode) const override {
    return seen(modes_[static_cast<std::size_t>(mode)], spot, height_m);
  }

 private:
  static std::optional<ImagePoint> seen(const optics::RigGeometry<double>& rig,
                                        FloorSpot spot,
                                        double height_m) {
    const FloorPoint at = to_point(spot);
    const auto pixel = optics::floor_to_pixel(rig, at.x_m, at.y_m, height_m);
    if (!pixel) return std::nullopt;
    return ImagePoint{pixel->u_px, pixel->v_px};
  }

  optics::RigGeometry<double> rig_;
  std::vector<optics::RigGeometry<double>> modes_;
};

class MapKnocks final : public KnockModel {
 public:
  MapKnocks(const FloorMap& map,
            ImagePoint centre,
            double eye_height_m,
            std::vector<const FloorMap*> modes)
      : map_(map), centre_(centre), eye_height_m_(eye_height_m), modes_(std::move(modes)) {
    // How the image's axes lie on the floor: where places a little ahead and to the left appear.
    const auto ahead = map_.pixel_of({eye_height_m, 0.0}, 0.0);
    const auto left = map_.pixel_of({eye_height_m, 0.5 * std::numbers::pi}, 0.0);
    if (ahead) forward_azimuth_rad_ = azimuth(*ahead);
    if (ahead && left) {
      turn_ = wrap_angle(azimuth(*left) - forward_azimuth_rad_) > 0.0 ? 1.0 : -1.0;
    }
  }

  [[nodiscard]] std::optional<ImagePoint> pixel_of(FloorSpot spot,
                                                   double height_m,
                                                   KnockKind kind,
                                                   std::span<const double> a) const override {
    switch (kind) {
      case KnockKind::centre: {
        auto at = map_.pixel_of(spot, height_m);
        if (at) *at = {at->u_px + a[0], at->v_px + a[1]};
        return at;
      }
      case KnockKind::tilt: {
        // Along u and v on the floor.
        const FloorPoint p = to_point(spot);
        const double down = eye_height_m_ - height_m;
        const double c = std::cos(forward_azimuth_rad_);
        const double s = std::sin(forward_azimuth_rad_);
        double x = c * p.x_m - s * turn_ * p.y_m;
        double y = s * p.x_m + c * turn_ * p.y_m;
        // The direction (x, y, -down) turned by -2 a about the axis that tips up towards (a0, a1).
        const double tip = 2.0 * std::hypot(a[0], a[1]);
        if (tip == 0.0) return map_.pixel_of(spot, height_m);
        const double ex = a[0] / std::hypot(a[0], a[1]);
        const double ey = a[1] / std::hypot(a[0], a[1]);
        const double along = ex * x + ey * y;
        const double across = -ey * x + ex * y;
        const double turned_along = std::cos(tip) * along + std::sin(tip) * down;
        const double turned_down = -std::sin(tip) * along + std::cos(tip) * down;
        if (!(turned_down > 0.0)) return std::nullopt;
        const double scale = down / turned_down;
        x = scale * (ex * turned_along - ey * across);
        y = scale * (ey * turned_along + ex * across);
        return map_.pixel_of(to_spot({c * x + s * y, turn_ * (-s * x + c * y)}), height_m);
      }
      case KnockKind::eye_height: {
        const double before = eye_height_m_ - height_m;
        const double after = before + a[0];
        if (!(after > 0.0)) return std::nullopt;
        return map_.pixel_of({spot.range_m * before / after, spot.bearing_rad}, height_m);
      }
      case KnockKind::focal:
        return scaled(spot, height_m, a[0], 0.0);
      case KnockKind::mirror:
        return scaled(spot, height_m, a[0], 0.1 * a[1]);
      case KnockKind::heading:
        return map_.pixel_of({spot.range_m, wrap_angle(spot.bearing_rad - a[0])}, height_m);
      case KnockKind::count:
        break;
    }
    return std::nullopt;
  }
  [[nodiscard]] int modes() const override { return static_cast<int>(modes_.size()); }
  [[nodiscard]] std::optional<ImagePoint> pixel_in_mode(FloorSpot spot,
                                                        double height_m,
                                                        int mode) const override {
    return modes_[static_cast<std::size_t>(mode)]->pixel_of(spot, height_m);
  }

 private:
  [[nodiscard]] double azimuth(ImagePoint p) const {
    return std::atan2(p.v_px - centre_.v_px, p.u_px - centre_.u_px);
  }
  [[nodiscard]] std::optional<ImagePoint> scaled(FloorSpot spot,
                                                 double height_m,
                                                 double linear,
                                                 double cubic) const {
    constexpr double kUnitPx = 100.0;
    auto at = map_.pixel_of(spot, height_m);
    if (!at) return at;
    const double du = at->u_px - centre_.u_px;
    const double dv = at->v_px - centre_.v_px;
    const double factor = 1.0 + linear + cubic * (du * du + dv * dv) / (kUnitPx * kUnitPx);
    return ImagePoint{centre_.u_px + factor * du, centre_.v_px + factor * dv};
  }

  const FloorMap& map_;
  ImagePoint centre_;
  double eye_height_m_;
  double forward_azimuth_rad_ = 0.0;
  double turn_ = 1.0;  ///< +1 where bearing grows with azimuth
  std::vector<const FloorMap*> modes_;
};

}  // namespace

optics::RigGeometry<double> knocked(optics::RigGeometry<double> rig,
                                    KnockKind kind,
                                    std::span<const double> amounts) {
  switch (kind) {
    case KnockKind::centre:
      rig.cu_px += amounts[0];
      rig.cv_px += amounts[1];
      break;
    case KnockKind::tilt:
      rig.tilt_x += amounts[0];
      rig.tilt_y += amounts[1];
      break;
    case KnockKind::eye_height:
      rig.eye_height_m += amounts[0];
      break;
    case KnockKind::focal:
      rig.focal_px *= 1.0 + amounts[0];
      break;
    case KnockKind::mirror:
      if (rig.mirror.kind == optics::MirrorKind::cone) {
        rig.mirror.slope_rad *= 1.0 + amounts[0];
        rig.distance_m *= 1.0 + amounts[1];
      } else if (rig.mirror.kind == optics::MirrorKind::profile) {
        rig.mirror.profile_modes[0] += amounts[0];
        rig.mirror.profile_modes[1] += amounts[1];
      } else {
        rig.mirror.vertex_radius_m *= 1.0 + amounts[0];
        rig.mirror.conic_constant += amounts[1];
      }
      break;
    case KnockKind::heading:
      rig.heading_rad += amounts[0];
      break;
    case KnockKind::count:
      break;
  }
  return rig;
}

std::unique_ptr<KnockModel> knocks_of_rig(optics::RigGeometry<double> rig,
                                          std::vector<optics::RigGeometry<double>> modes) {
  return std::make_unique<RigKnocks>(std::move(rig), std::move(modes));
}

std::unique_ptr<KnockModel> knocks_of_map(const FloorMap& map,
                                          ImagePoint centre,
                                          double eye_height_m,
                                          std::vector<const FloorMap*> modes) {
  return std::make_unique<MapKnocks>(map, centre, eye_height_m, std::move(modes));
}

}  // namespace rondel::verdict
