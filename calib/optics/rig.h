#pragma once

#include <limits>

#include "calib/optics/mirror.h"

namespace rondel::optics {

/// The robot's optics, with everything that can be off about them.
///
/// Image axes: x along u, y along v, z along the optical axis, up; pinhole in the origin;
/// u = cu + f x/z, v = cv + f y/z. Where the picture has been flipped these axes are left-handed;
/// nothing here depends on handedness.
///
/// Mirror: its vertex stands at (shift_x, shift_y, distance); its axis points along
/// (tilt_x, tilt_y, 1), brought to unit length, so a tilt is the tangent of an angle (radians, as
/// good as, below 5 degrees).
///
/// Floor: its upward normal is (floor_tilt_x, floor_tilt_y, 1), brought to unit length; the pinhole
/// stands eye_height above it. The floor's own axes come from the image's by the smallest rotation
/// that makes the normal +z.
///
/// Robot frame: origin on the floor straight below (along the floor's normal) the pinhole, through
/// which the mirror's axis runs where nothing is off.
/// bearing = heading + azimuth where `mirrored`, heading - azimuth where not, azimuth =
/// atan2(y, x) in the floor's axes.
template <class T>
struct RigGeometry {
  T focal_px{0.0};
  T cu_px{0.0};
  T cv_px{0.0};
  T distance_m{0.0};
  Mirror<T> mirror;
  T tilt_x{0.0};
  T tilt_y{0.0};
  T shift_x_m{0.0};
  T shift_y_m{0.0};
  T eye_height_m{0.0};
  T floor_tilt_x{0.0};
  T floor_tilt_y{0.0};
  T heading_rad{0.0};
  bool mirrored = true;
  /// Beyond this distance from its axis there is no mirror. Endless by default: a fit must not lose
  /// a mark because the rim is drawn a hair too small.
  double rim_radius_m = std::numeric_limits<double>::infinity();

  /// The same rig in another scalar, derivatives dropped.
  template <class U>
  [[nodiscard]] RigGeometry<U> in() const {
    RigGeometry<U> r;
    r.focal_px = U(value_of(focal_px));
    r.cu_px = U(value_of(cu_px));
    r.cv_px = U(value_of(cv_px));
    r.distance_m = U(value_of(distance_m));
    r.mirror = mirror.template in<U>();
    r.tilt_x = U(value_of(tilt_x));
    r.tilt_y = U(value_of(tilt_y));
    r.shift_x_m = U(value_of(shift_x_m));
    r.shift_y_m = U(value_of(shift_y_m));
    r.eye_height_m = U(value_of(eye_height_m));
    r.floor_tilt_x = U(value_of(floor_tilt_x));
    r.floor_tilt_y = U(value_of(floor_tilt_y));
    r.heading_rad = U(value_of(heading_rad));
    r.mirrored = mirrored;
    r.rim_radius_m = rim_radius_m;
    return r;
  }
  /// The same rig with plain numbers.
  [[nodiscard]] RigGeometry<double> values() const { return in<double>(); }

  /// The unit vector along the mirror's axis, away from the camera.
  [[nodiscard]] Vec3<T> axis() const { return unit_from_slopes(tilt_x, tilt_y); }
  [[nodiscard]] Vec3<T> vertex_m() const { return {shift_x_m, shift_y_m, distance_m}; }
  /// The floor's unit normal, upwards.
  [[nodiscard]] Vec3<T> floor_up() const { return unit_from_slopes(floor_tilt_x, floor_tilt_y); }
};

}  // namespace rondel::optics
