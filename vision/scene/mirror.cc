#include "vision/scene/mirror.h"

#include <algorithm>
#include <cassert>

namespace rondel::scene {

Mirror::Mirror(const SceneRig& rig)
    : rim_m_{rig.rim_radius_m},
      vertex_{rig.shift_x_m, rig.shift_y_m, rig.distance_m},
      camera_from_mirror_{rotation_by({rig.tilt_x_rad, rig.tilt_y_rad, 0.0})},
      mirror_from_camera_{camera_from_mirror_.inverse()} {
  if (rig.kind == MirrorKind::conic) {
    a_ = 1.0 + rig.conic_constant;
    b_ = -2.0 * rig.vertex_radius_m;
    if (a_ > 0.0) limit_m_ = rig.vertex_radius_m / std::sqrt(a_);
  } else {
    const double slope = std::tan(rig.slope_rad);
    a_ = -1.0 / (slope * slope);
  }
  rim_z_ = sag(rim_m_).z;
}

Mirror::Sag Mirror::sag(double s_m) const {
  // The root of a z^2 + b z + s^2 = 0 that is 0 on the axis; its slopes by differentiating that.
  const double root = std::sqrt(std::max(0.0, b_ * b_ - 4.0 * a_ * s_m * s_m));
  if (b_ == 0.0) {
    const double slope = std::sqrt(-1.0 / a_);
    return {slope * s_m, slope, 0.0};
  }
  const double z = 2.0 * s_m * s_m / (-b_ + root);
  const double steep = root;  // -(2 a z + b)
  const double slope = 2.0 * s_m / steep;
  return {z, slope, (2.0 + 2.0 * a_ * slope * slope) / steep};
}

std::optional<Vec3> Mirror::hit(Vec3 from, Vec3 towards) const {
  const Vec3 o = to_mirror(from);
  const Vec3 d = mirror_from_camera_(towards);
  const double qa = d.x * d.x + d.y * d.y + a_ * d.z * d.z;
  const double qb = 2.0 * (o.x * d.x + o.y * d.y + a_ * o.z * d.z) + b_ * d.z;
  const double qc = o.x * o.x + o.y * o.y + a_ * o.z * o.z + b_ * o.z;
  const double disc = qb * qb - 4.0 * qa * qc;
  if (!(disc >= 0.0)) return std::nullopt;
  const double q = -0.5 * (qb + std::copysign(std::sqrt(disc), qb));
  const double roots[2] = {q / qa, qc / q};
  double best = std::numeric_limits<double>::infinity();
  for (const double t : roots) {
    if (!(t > 0.0) || !(t < best)) continue;
    const Vec3 p = o + t * d;
    // The sheet that touches the vertex, up to the rim; the other sheet lies below the vertex.
    if (p.x * p.x + p.y * p.y > rim_m_ * rim_m_) continue;
    if (p.z < -1e-12 || p.z > rim_z_ * (1.0 + 1e-9) + 1e-12) continue;
    best = t;
  }
  if (!std::isfinite(best)) return std::nullopt;
  return from + best * towards;
}

Vec3 Mirror::normal(Vec3 at) const {
  const Vec3 p = to_mirror(at);
  const Vec3 gradient{p.x, p.y, a_ * p.z + 0.5 * b_};
  const double size = length(gradient);
  if (size == 0.0) return camera_from_mirror_({0.0, 0.0, -1.0});  // a cone's tip
  return (1.0 / size) * camera_from_mirror_(gradient);
}

}  // namespace rondel::scene
