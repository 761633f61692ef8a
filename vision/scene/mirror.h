#pragma once

#include <cmath>
#include <limits>
#include <optional>

#include "vision/scene/scene_rig.h"
#include "vision/scene/vec3.h"

namespace rondel::scene {

/// The mirror as the implicit surface x^2 + y^2 + a z^2 + b z = 0 of its own frame, with the
/// transforms between that frame and the camera's.
class Mirror {
 public:
  explicit Mirror(const SceneRig& rig);

  /// Where the line from `from` along `towards` (camera frame, any length) first meets the mirror
  /// inside its rim, in front of `from`.
  [[nodiscard]] std::optional<Vec3> hit(Vec3 from, Vec3 towards) const;
  /// Unit normal at a point on the mirror (camera frame), towards the camera.
  [[nodiscard]] Vec3 normal(Vec3 at) const;

  [[nodiscard]] Vec3 to_mirror(Vec3 in_camera) const {
    return mirror_from_camera_(in_camera - vertex_);
  }
  [[nodiscard]] Vec3 to_camera(Vec3 in_mirror) const {
    return camera_from_mirror_(in_mirror) + vertex_;
  }
  [[nodiscard]] Vec3 turned_to_camera(Vec3 in_mirror) const {
    return camera_from_mirror_(in_mirror);
  }

  /// Height of the surface over the vertex at distance `s_m` from the axis, and its slopes.
  struct Sag {
    double z = 0.0;
    double slope = 0.0;      ///< dz/ds
    double curvature = 0.0;  ///< d2z/ds2
  };
  [[nodiscard]] Sag sag(double s_m) const;
  /// The surface exists for distances from the axis below this, m.
  [[nodiscard]] double limit_m() const { return limit_m_; }
  [[nodiscard]] double rim_radius_m() const { return rim_m_; }
  [[nodiscard]] double rim_z_m() const { return rim_z_; }
  /// Pointed at the vertex (a cone).
  [[nodiscard]] bool pointed() const { return b_ == 0.0; }
  [[nodiscard]] Vec3 vertex() const { return vertex_; }

 private:
  double a_ = 0.0;
  double b_ = 0.0;
  double rim_m_ = 0.0;
  double rim_z_ = 0.0;
  double limit_m_ = std::numeric_limits<double>::infinity();
  Vec3 vertex_;
  Rotation camera_from_mirror_;
  Rotation mirror_from_camera_;
};

}  // namespace rondel::scene
