#pragma once

#include <array>
#include <cmath>
#include <optional>

#include "calib/optics/rig.h"

namespace rondel::optics {

/// Image point and floor point in any scalar.
template <class T>
struct Pixel {
  T u_px, v_px;
};
template <class T>
struct Floor {
  T x_m, y_m;
};

/// A line of sight after the mirror, in image axes.
template <class T>
struct Sight {
  Vec3<T> from_m;  ///< on the mirror
  Vec3<T> along;   ///< not of unit length
};

/// Pixel -> ray -> mirror -> reflected ray. No answer where the pixel shows no mirror.
template <class T>
[[nodiscard]] std::optional<Sight<T>> sight_of(const RigGeometry<T>& rig,
                                               const T& u_px,
                                               const T& v_px) {
  const Vec3<T> ray{(u_px - rig.cu_px) / rig.focal_px, (v_px - rig.cv_px) / rig.focal_px, T(1.0)};
  const Vec3<T> axis = rig.axis();
  const Vec3<T> vertex = rig.vertex_m();
  const Vec3<T> eye_in_mirror = turn_onto_z(axis, T(-1.0) * vertex);
  const Vec3<T> ray_in_mirror = turn_onto_z(axis, ray);
  const std::optional<Hit<T>> hit = meet(rig.mirror, eye_in_mirror, ray_in_mirror);
  if (!hit) return std::nullopt;
  const double sx = value_of(hit->at_m.x);
  const double sy = value_of(hit->at_m.y);
  if (sx * sx + sy * sy > rig.rim_radius_m * rig.rim_radius_m) return std::nullopt;
  const Vec3<T> along_in_mirror = reflect(ray_in_mirror, hit->normal);
  return Sight<T>{turn_from_z(axis, hit->at_m) + vertex, turn_from_z(axis, along_in_mirror)};
}

/// A vector of the floor's axes (x, y as seen from the robot's origin) in the robot frame.
template <class T>
[[nodiscard]] Floor<T> robot_from_floor_axes(const RigGeometry<T>& rig, const T& x, const T& y) {
  using std::cos;
  using std::sin;
  const T c = cos(rig.heading_rad);
  const T s = sin(rig.heading_rad);
  const T across = rig.mirrored ? y : -y;
  return {c * x - s * across, s * x + c * across};
}

/// The inverse of robot_from_floor_axes.
template <class T>
[[nodiscard]] Floor<T> floor_axes_from_robot(const RigGeometry<T>& rig, const T& x, const T& y) {
  using std::cos;
  using std::sin;
  const T c = cos(rig.heading_rad);
  const T s = sin(rig.heading_rad);
  const T across = c * y - s * x;
  return {c * x + s * y, rig.mirrored ? across : -across};
}

/// The place `height_m` above the floor which the pixel shows, in the robot frame. No answer where
/// the pixel shows no mirror or its line of sight does not come down to that height (the horizon).
template <class T>
[[nodiscard]] std::optional<Floor<T>> pixel_to_floor(const RigGeometry<T>& rig,
                                                     const T& u_px,
                                                     const T& v_px,
                                                     const T& height_m) {
  const std::optional<Sight<T>> sight = sight_of(rig, u_px, v_px);
  if (!sight) return std::nullopt;
  const Vec3<T> up = rig.floor_up();
  const T sink = dot(up, sight->along);
  const T drop = height_m - rig.eye_height_m - dot(up, sight->from_m);
  if (!(value_of(sink) * value_of(drop) > 0.0)) return std::nullopt;
  const Vec3<T> place = sight->from_m + (drop / sink) * sight->along;
  const Vec3<T> on_floor = turn_onto_z(up, place);
  return robot_from_floor_axes(rig, on_floor.x, on_floor.y);
}

namespace internal {

/// How far the line of sight of a pixel misses a target: two components, smooth through the horizon
/// (no division by the sink of the line), zero where the target lies on the line.
/// `by_distance` says which of two equivalent second components is well conditioned.
template <class T>
[[nodiscard]] std::optional<std::array<T, 2>> miss(const RigGeometry<T>& rig,
                                                   const Pixel<T>& pixel,
                                                   const Vec3<T>& target,
                                                   const Vec3<T>& up,
                                                   const Vec3<T>& out,
                                                   const Vec3<T>& side,
                                                   bool by_distance) {
  const std::optional<Sight<T>> sight = sight_of(rig, pixel.u_px, pixel.v_px);
  if (!sight) return std::nullopt;
  const Vec3<T> to_target = target - sight->from_m;
  const T along_up = dot(sight->along, up);
  const T along_out = dot(sight->along, out);
  const T along_side = dot(sight->along, side);
  const T target_up = dot(to_target, up);
  const T target_out = dot(to_target, out);
  const T target_side = dot(to_target, side);
  return std::array<T, 2>{along_out * target_up - along_up * target_out,
                          by_distance ? along_side * target_out - along_out * target_side
                                      : along_side * target_up - along_up * target_side};
}

/// Target and directions in image axes, of a place in the robot frame.
template <class T>
struct Aim {
  Vec3<T> target, up, out, side;
};
template <class T>
[[nodiscard]] Aim<T> aim_at(const RigGeometry<T>& rig,
                            const T& x_m,
                            const T& y_m,
                            const T& height_m,
                            double out_x,
                            double out_y) {
  Aim<T> aim;
  aim.up = rig.floor_up();
  const Floor<T> axes = floor_axes_from_robot(rig, x_m, y_m);
  const Vec3<T> target_floor{axes.x_m, axes.y_m, height_m - rig.eye_height_m};
  aim.target = turn_from_z(aim.up, target_floor);
  aim.out = turn_from_z(aim.up, Vec3<T>{T(out_x), T(out_y), T(0.0)});
  aim.side = turn_from_z(aim.up, Vec3<T>{T(-out_y), T(out_x), T(0.0)});
  return aim;
}

}  // namespace internal

/// The image radius at which a straight, centred rig (tilts and shifts taken as none) shows the
/// place at `range_m`, `height_m` above the floor. Safeguarded Newton in the angle of the camera's
/// ray, inside a bracket. No answer where no ray of the mirror goes there.
[[nodiscard]] std::optional<double> axial_radius_px(const RigGeometry<double>& rig,
                                                    double range_m,
                                                    double height_m);

/// The range at `height_m` which a straight, centred rig shows at `radius_px`.
[[nodiscard]] std::optional<double> axial_range_m(const RigGeometry<double>& rig,
                                                  double radius_px,
                                                  double height_m);

/// Where the place at (x_m, y_m) in the robot frame, `height_m` above the floor, appears. Axial
/// root find, then Newton on the general trace. No answer where it cannot be seen. Closes with
/// pixel_to_floor to 1e-6 px.
[[nodiscard]] std::optional<Pixel<double>> floor_to_pixel(const RigGeometry<double>& rig,
                                                          double x_m,
                                                          double y_m,
                                                          double height_m);

/// The same in any scalar: solved on plain numbers, derivatives by the implicit function theorem.
template <class T>
[[nodiscard]] std::optional<Pixel<T>> floor_to_pixel(const RigGeometry<T>& rig,
                                                     const T& x_m,
                                                     const T& y_m,
                                                     const T& height_m) {
  const RigGeometry<double> plain = rig.values();
  const std::optional<Pixel<double>> at =
      floor_to_pixel(plain, value_of(x_m), value_of(y_m), value_of(height_m));
  if (!at) return std::nullopt;
  return refine_pixel(rig, plain, *at, x_m, y_m, height_m);
}

/// The Jacobian of the miss at a pixel, and the choice of components that goes with it.
struct MissJacobian {
  double out_x = 1.0, out_y = 0.0;  ///< direction of the target in the floor's axes
  bool by_distance = false;
  std::array<double, 2> miss{};
  double du0 = 0.0, dv0 = 0.0, du1 = 0.0, dv1 = 0.0;  ///< d miss[i] / d u, d v
};
[[nodiscard]] std::optional<MissJacobian> miss_jacobian(
    const RigGeometry<double>& rig, Pixel<double> at, double x_m, double y_m, double height_m);

/// One Newton step in T from the plain solution `at`: carries the derivatives with respect to
/// everything that is a variable in `rig` and the place.
template <class T>
[[nodiscard]] std::optional<Pixel<T>> refine_pixel(const RigGeometry<T>& rig,
                                                   const RigGeometry<double>& plain,
                                                   Pixel<double> at,
                                                   const T& x_m,
                                                   const T& y_m,
                                                   const T& height_m) {
  const std::optional<MissJacobian> j =
      miss_jacobian(plain, at, value_of(x_m), value_of(y_m), value_of(height_m));
  if (!j) return std::nullopt;
  const internal::Aim<T> aim = internal::aim_at(rig, x_m, y_m, height_m, j->out_x, j->out_y);
  const std::optional<std::array<T, 2>> miss = internal::miss(
      rig, Pixel<T>{T(at.u_px), T(at.v_px)}, aim.target, aim.up, aim.out, aim.side, j->by_distance);
  if (!miss) return std::nullopt;
  const double det = j->du0 * j->dv1 - j->dv0 * j->du1;
  if (det == 0.0) return std::nullopt;
  return Pixel<T>{T(at.u_px) - (T(j->dv1) * (*miss)[0] - T(j->dv0) * (*miss)[1]) / T(det),
                  T(at.v_px) - (T(j->du0) * (*miss)[1] - T(j->du1) * (*miss)[0]) / T(det)};
}

/// The image radius of the horizon of a straight, centred rig: the smallest radius whose line of
/// sight does not sink. No answer where the mirror ends before.
[[nodiscard]] std::optional<double> horizon_radius_px(const RigGeometry<double>& rig);

/// The image radius at which a straight, centred rig stops showing `height_m` above the floor: the
/// horizon, or the rim where it comes first.
[[nodiscard]] double last_radius_px(const RigGeometry<double>& rig);

/// The rim as an ellipse in the image: centre, and the symmetric matrix S with
/// (p - centre)^T S^-1 (p - centre) = 1 on the ellipse, px^2.
template <class T>
struct RimImage {
  Pixel<T> centre;
  T s_uu, s_uv, s_vv;
};

/// The image of the circle of radius `rim_radius_m` on the mirror, in closed form (the dual conic
/// of a circle's projection; Hartley and Zisserman 2004, section 8.3). No answer where the mirror
/// has no such circle.
template <class T>
[[nodiscard]] std::optional<RimImage<T>> rim_image(const RigGeometry<T>& rig,
                                                   const T& rim_radius_m) {
  const std::optional<T> sag = sag_m(rig.mirror, rim_radius_m);
  if (!sag) return std::nullopt;
  const Vec3<T> axis = rig.axis();
  const Vec3<T> c = rig.vertex_m() + *sag * axis;
  const T r2 = rim_radius_m * rim_radius_m;
  // Q = r^2 (I - a a^T) - c c^T, scaled so that its last element is -1.
  const T scale = T(-1.0) / (r2 * (T(1.0) - axis.z * axis.z) - c.z * c.z);
  if (!(value_of(scale) > 0.0)) return std::nullopt;
  const auto q = [&](const T& ai, const T& aj, const T& ci, const T& cj, double same) {
    return scale * (r2 * (T(same) - ai * aj) - ci * cj);
  };
  const T x = -q(axis.x, axis.z, c.x, c.z, 0.0);
  const T y = -q(axis.y, axis.z, c.y, c.z, 0.0);
  const T f2 = rig.focal_px * rig.focal_px;
  RimImage<T> image;
  image.centre = {rig.cu_px + rig.focal_px * x, rig.cv_px + rig.focal_px * y};
  image.s_uu = f2 * (q(axis.x, axis.x, c.x, c.x, 1.0) + x * x);
  image.s_uv = f2 * (q(axis.x, axis.y, c.x, c.y, 0.0) + x * y);
  image.s_vv = f2 * (q(axis.y, axis.y, c.y, c.y, 1.0) + y * y);
  return image;
}

/// Where the camera sees its own pinhole: the pixel whose ray meets the mirror at right angles. No
/// answer for a cone.
template <class T>
[[nodiscard]] std::optional<Pixel<T>> reflection_centre(const RigGeometry<T>& rig) {
  if (rig.mirror.kind == MirrorKind::cone) return std::nullopt;
  const Quadric<T> q = rig.mirror.kind == MirrorKind::profile
                           ? Quadric<T>{T(1.0), T(0.0), T(rig.mirror.profile->vertex_radius_m())}
                           : quadric_of(rig.mirror);
  const Vec3<T> axis = rig.axis();
  const Vec3<T> vertex = rig.vertex_m();
  const Vec3<T> eye = turn_onto_z(axis, T(-1.0) * vertex);
  // The foot of the perpendicular: p = eye + k grad(p), with k near -distance / vertex radius.
  T k = eye.z / q.gamma;
  Vec3<T> p{T(0.0), T(0.0), T(0.0)};
  for (int i = 0; i < 8; ++i) {
    const T a = T(1.0) - k * q.alpha;
    const T b = T(1.0) - k * q.beta;
    p = {eye.x / a, eye.y / a, (eye.z - k * q.gamma) / b};
    const T f = q.alpha * (p.x * p.x + p.y * p.y) + (q.beta * p.z - T(2.0) * q.gamma) * p.z;
    const T slope = T(2.0) * q.alpha * q.alpha * (p.x * p.x + p.y * p.y) / a +
                    T(2.0) * (q.beta * p.z - q.gamma) * (q.beta * p.z - q.gamma) / b;
    k = k - f / slope;
  }
  const Vec3<T> at = turn_from_z(axis, p) + vertex;
  if (!(value_of(at.z) > 0.0)) return std::nullopt;
  return Pixel<T>{rig.cu_px + rig.focal_px * at.x / at.z, rig.cv_px + rig.focal_px * at.y / at.z};
}

}  // namespace rondel::optics
