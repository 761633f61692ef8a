#pragma once

#include "calib/base/geometry.h"
#include "calib/venue/spec.h"

namespace rondel::scene {

enum class MirrorKind { conic, cone };

/// The optics as they truly are, in the scene's own terms (compare RigSpec, which says what the
/// drawing claims).
///
/// Camera frame: pinhole at the origin, x along u, y along v, z along the optical axis, upwards.
/// The raw picture is u = cu + f x/z, v = cv + f y/z with the principal point (cu, cv); a rig that
/// is not `mirrored` has a board that turns the raw picture over, v -> height - 1 - v.
/// Mirror frame: vertex at the origin, z along the mirror's axis away from the camera. It stands in
/// the camera frame at (shift_x, shift_y, distance), turned by the rotation vector
/// (tilt_x, tilt_y, 0), about its vertex.
/// Robot frame: origin on the floor plumb under the pinhole, x forward, y left, z up. The chassis
/// is turned against it by the rotation vector (lean_x, lean_y, 0), about the pinhole.
struct SceneRig {
  int width_px = 320;
  int height_px = 240;
  double focal_px = 260.0;
  double principal_du_px = 0.0;  ///< principal point from the image's centre
  double principal_dv_px = 0.0;
  MirrorKind kind = MirrorKind::conic;
  double vertex_radius_m = 0.040;  ///< conic
  double conic_constant = -2.25;   ///< conic: K < -1 hyperboloid, -1 paraboloid, 0 sphere
  double slope_rad = 0.6;          ///< cone: sag = s tan(slope)
  double rim_radius_m = 0.030;
  double distance_m = 0.060;  ///< pinhole to vertex
  double shift_x_m = 0.0;
  double shift_y_m = 0.0;
  double tilt_x_rad = 0.0;
  double tilt_y_rad = 0.0;
  double eye_height_m = 0.160;  ///< pinhole above the floor
  double lean_x_rad = 0.0;      ///< chassis against the floor
  double lean_y_rad = 0.0;
  double heading_rad = 0.0;  ///< bearing of u's direction
  bool mirrored = true;
};

/// The rig a drawing describes, built exactly as drawn (straight, values without their tolerance).
/// Needs `mirror`, `focal_px` and `eye_height_m`; a measured profile becomes the conic through its
/// outermost and middle points. Throws InputError when something it needs is missing.
[[nodiscard]] SceneRig rig_as_drawn(const RigSpec& drawing);

/// A rig built within the drawing's tolerances: every value moved by a normal error of its
/// tolerance, the mirror tilted in a random direction by `tilt_rad` and shifted by `shift_m`.
/// The same seed gives the same rig everywhere.
[[nodiscard]] SceneRig rig_as_built(const RigSpec& drawing,
                                    unsigned seed,
                                    double tilt_rad,
                                    double shift_m);

}  // namespace rondel::scene
