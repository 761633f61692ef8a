#include "vision/scene/truth_trace.h"

#include <algorithm>
#include <array>
#include <cmath>

#include "vision/scene/mirror.h"

namespace rondel::scene {
namespace {

double cu(const SceneRig& rig) { return 0.5 * (rig.width_px - 1) + rig.principal_du_px; }
double cv(const SceneRig& rig) { return 0.5 * (rig.height_px - 1) + rig.principal_dv_px; }

/// Between the picture as delivered and the raw one; its own inverse.
ImagePoint turned_over(const SceneRig& rig, ImagePoint p) {
  return rig.mirrored ? p : ImagePoint{p.u_px, rig.height_px - 1 - p.v_px};
}

Vec3 line_of(const SceneRig& rig, ImagePoint pixel) {
  const ImagePoint raw = turned_over(rig, pixel);
  return {(raw.u_px - cu(rig)) / rig.focal_px, (raw.v_px - cv(rig)) / rig.focal_px, 1.0};
}

/// Directions of the camera frame in the robot frame.
Rotation robot_from_camera(const SceneRig& rig) {
  const Rotation lean = rotation_by({rig.lean_x_rad, rig.lean_y_rad, 0.0});
  const Rotation turn = rotation_by({0.0, 0.0, rig.heading_rad});
  const Rotation back = turn.inverse();  // its rows are turn's columns
  const Vec3 column_x = lean(back.row_x);
  const Vec3 column_y = lean(back.row_y);
  const Vec3 column_z = lean(back.row_z);
  return Rotation{column_x, column_y, column_z}.inverse();
}

/// A point of the mirror with its first and second derivatives by two coordinates.
struct Patch {
  Vec3 p, p1, p2, p11, p12, p22;
};

/// By (x, y): smooth everywhere on a conic.
Patch patch_by_xy(const Mirror& mirror, double x, double y) {
  const double s = std::hypot(x, y);
  const Mirror::Sag sag = mirror.sag(s);
  const double c = s > 0.0 ? x / s : 1.0;
  const double d = s > 0.0 ? y / s : 0.0;
  const double around = s > 0.0 ? sag.slope / s : sag.curvature;
  return {{x, y, sag.z},
          {1.0, 0.0, sag.slope * c},
          {0.0, 1.0, sag.slope * d},
          {0.0, 0.0, sag.curvature * c * c + around * d * d},
          {0.0, 0.0, (sag.curvature - around) * c * d},
          {0.0, 0.0, sag.curvature * d * d + around * c * c}};
}

/// By (s, azimuth): a cone is smooth along and around, but not across its tip.
Patch patch_by_turn(const Mirror& mirror, double s, double azimuth) {
  const Mirror::Sag sag = mirror.sag(s);
  const double c = std::cos(azimuth);
  const double d = std::sin(azimuth);
  return {{s * c, s * d, sag.z},
          {c, d, sag.slope},
          {-s * d, s * c, 0.0},
          {0.0, 0.0, sag.curvature},
          {-d, c, 0.0},
          {-s * c, -s * d, 0.0}};
}

/// Least path from `eye` over the mirror to `target`, both in the mirror frame (Fermat): Newton's
/// method on the path's length. A convex mirror has one least path.
std::optional<Vec3> point_of_reflection(const Mirror& mirror, Vec3 eye, Vec3 target) {
  const double rim = mirror.rim_radius_m();
  const double far = std::min(1.5 * rim, rim + 0.9 * (mirror.limit_m() - rim));
  const bool turning = mirror.pointed();
  const double azimuth = std::atan2(target.y, target.x);
  double q1 = turning ? 0.5 * rim : 0.5 * rim * std::cos(azimuth);
  double q2 = turning ? azimuth : 0.5 * rim * std::sin(azimuth);
  const auto patch = [&](double a, double b) {
    return turning ? patch_by_turn(mirror, a, b) : patch_by_xy(mirror, a, b);
  };
  const auto inside = [&](double a, double b) {
    return turning ? a > 0.0 && a < far : std::hypot(a, b) < far;
  };
  const auto path = [&](double a, double b) {
    const Vec3 p = patch(a, b).p;
    return length(p - eye) + length(p - target);
  };
  for (int iteration = 0; iteration < 200; ++iteration) {
    const Patch at = patch(q1, q2);
    double g1 = 0.0;
    double g2 = 0.0;
    double h11 = 0.0;
    double h12 = 0.0;
    double h22 = 0.0;
    for (const Vec3 end : {eye, target}) {
      const double distance = length(at.p - end);
      const Vec3 u = (1.0 / distance) * (at.p - end);
      const double u1 = dot(u, at.p1);
      const double u2 = dot(u, at.p2);
      g1 += u1;
      g2 += u2;
      h11 += (dot(at.p1, at.p1) - u1 * u1) / distance + dot(u, at.p11);
      h12 += (dot(at.p1, at.p2) - u1 * u2) / distance + dot(u, at.p12);
      h22 += (dot(at.p2, at.p2) - u2 * u2) / distance + dot(u, at.p22);
    }
    if (!(h11 > 0.0) || !(h22 > 0.0) || !(h11 * h22 > h12 * h12)) {  // not convex: go downhill
      h11 = std::abs(h11) + dot(at.p1, at.p1) / length(at.p - eye);
      h22 = std::abs(h22) + dot(at.p2, at.p2) / length(at.p - eye);
      h12 = 0.0;
    }
    const double det = h11 * h22 - h12 * h12;
    double d1 = -(h22 * g1 - h12 * g2) / det;
    double d2 = -(h11 * g2 - h12 * g1) / det;
    // Near the minimum all lengths agree to rounding, and Newton's own step is the better judge.
    const double most = path(q1, q2) * (1.0 + 4e-16);
    int halvings = 0;
    while (halvings < 60 && (!inside(q1 + d1, q2 + d2) || path(q1 + d1, q2 + d2) > most)) {
      d1 *= 0.5;
      d2 *= 0.5;
      ++halvings;
    }
    if (halvings == 60) break;
    q1 += d1;
    q2 += d2;
    if (length(d1 * at.p1 + d2 * at.p2) < 1e-17) break;
  }
  const Patch at = patch(q1, q2);
  // A least path that is not stationary lies on a cone's tip or outside of what the mirror has.
  const Vec3 bend = unit(at.p - eye) + unit(at.p - target);
  if (std::abs(dot(bend, at.p1)) > 1e-9 * length(at.p1)) return std::nullopt;
  if (std::hypot(at.p.x, at.p.y) > rim * (1.0 + 1e-12)) return std::nullopt;
  // Both ends on the reflecting side: a straight line through the mirror is a least path as well.
  Vec3 outward = cross(at.p2, at.p1);
  if (outward.z > 0.0) outward = -outward;
  if (!(dot(outward, eye - at.p) > 0.0) || !(dot(outward, target - at.p) > 0.0)) {
    return std::nullopt;
  }
  return at.p;
}

}  // namespace

std::optional<ReflectedRay> reflected_ray(const SceneRig& rig, ImagePoint pixel) {
  const Mirror mirror{rig};
  const Vec3 line = unit(line_of(rig, pixel));
  const auto at = mirror.hit({}, line);
  if (!at) return std::nullopt;
  const Vec3 n = mirror.normal(*at);
  return ReflectedRay{*at, unit(line - 2.0 * dot(line, n) * n)};
}

std::optional<FloorSpot> floor_at(const SceneRig& rig, ImagePoint pixel, double height_m) {
  const auto ray = reflected_ray(rig, pixel);
  if (!ray) return std::nullopt;
  const Rotation turn = robot_from_camera(rig);
  const Vec3 from = turn(ray->at) + Vec3{0.0, 0.0, rig.eye_height_m};
  const Vec3 towards = turn(ray->direction);
  const double t = (height_m - from.z) / towards.z;
  if (!(t > 0.0) || !std::isfinite(t)) return std::nullopt;
  return to_spot(FloorPoint{from.x + t * towards.x, from.y + t * towards.y});
}

std::optional<ImagePoint> pixel_of_point(const SceneRig& rig, Vec3 in_robot) {
  const Mirror mirror{rig};
  const Rotation camera_from_robot = robot_from_camera(rig).inverse();
  const Vec3 in_camera = camera_from_robot(in_robot - Vec3{0.0, 0.0, rig.eye_height_m});
  const auto at = point_of_reflection(mirror, mirror.to_mirror({}), mirror.to_mirror(in_camera));
  if (!at) return std::nullopt;
  return project(rig, mirror.to_camera(*at));
}

std::optional<ImagePoint> pixel_of(const SceneRig& rig, FloorSpot spot, double height_m) {
  const FloorPoint p = to_point(spot);
  return pixel_of_point(rig, {p.x_m, p.y_m, height_m});
}

ImagePoint project(const SceneRig& rig, Vec3 in_camera) {
  return turned_over(rig,
                     {cu(rig) + rig.focal_px * in_camera.x / in_camera.z,
                      cv(rig) + rig.focal_px * in_camera.y / in_camera.z});
}

ImagedRim imaged_rim(const SceneRig& rig) {
  const Mirror mirror{rig};
  const double r = mirror.rim_radius_m();
  const Vec3 e1 = r * mirror.turned_to_camera({1.0, 0.0, 0.0});
  const Vec3 e2 = r * mirror.turned_to_camera({0.0, 1.0, 0.0});
  const Vec3 middle = mirror.to_camera({0.0, 0.0, mirror.rim_z_m()});
  // The rim is {cos t e1 + sin t e2 + middle}. A line of sight l meets its plane at the
  // coordinates (p, q) = (a.l, b.l) / (c.l) with a, b, c the dual base, so that the rim's image is
  // the conic (a.l)^2 + (b.l)^2 - (c.l)^2 = 0.
  const double volume = dot(e1, cross(e2, middle));
  const Vec3 a = (1.0 / volume) * cross(e2, middle);
  const Vec3 b = (1.0 / volume) * cross(middle, e1);
  const Vec3 c = (1.0 / volume) * cross(e1, e2);
  const double xx = a.x * a.x + b.x * b.x - c.x * c.x;
  const double xy = a.x * a.y + b.x * b.y - c.x * c.y;
  const double yy = a.y * a.y + b.y * b.y - c.y * c.y;
  const double xz = a.x * a.z + b.x * b.z - c.x * c.z;
  const double yz = a.y * a.z + b.y * b.z - c.y * c.z;
  const double zz = a.z * a.z + b.z * b.z - c.z * c.z;
  const double det = xx * yy - xy * xy;
  const double x0 = (xy * yz - yy * xz) / det;
  const double y0 = (xy * xz - xx * yz) / det;
  const double inside = -(zz + xz * x0 + yz * y0);
  const double mean = 0.5 * (xx + yy);
  const double half = std::hypot(0.5 * (xx - yy), xy);
  ImagedRim rim;
  rim.centre = project(rig, {x0, y0, 1.0});
  rim.ellipse.a_px = rig.focal_px * std::sqrt(inside / (mean - half));
  rim.ellipse.b_px = rig.focal_px * std::sqrt(inside / (mean + half));
  // The longer axis goes with the smaller eigenvalue.
  const double angle = 0.5 * std::atan2(-xy, -0.5 * (xx - yy));
  rim.ellipse.angle_rad = rig.mirrored ? angle : -angle;
  return rim;
}

double rim_radius_px(const ImagedRim& rim, double azimuth_rad) {
  const double t = azimuth_rad - rim.ellipse.angle_rad;
  return 1.0 / std::hypot(std::cos(t) / rim.ellipse.a_px, std::sin(t) / rim.ellipse.b_px);
}

ImagePoint imaged_vertex(const SceneRig& rig) { return project(rig, Mirror{rig}.vertex()); }

std::optional<FloorSpot> TrueFloorMap::floor_at(ImagePoint at, double height_m) const {
  return scene::floor_at(rig_, at, height_m);
}

std::optional<ImagePoint> TrueFloorMap::pixel_of(FloorSpot spot, double height_m) const {
  return scene::pixel_of(rig_, spot, height_m);
}

}  // namespace rondel::scene
