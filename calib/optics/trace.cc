#include "calib/optics/trace.h"

#include <algorithm>
#include <limits>
#include <numbers>

namespace rondel::optics {
namespace {

/// The camera's rays end here: just short of a right angle to the optical axis.
constexpr double kLastRayRad = 0.5 * std::numbers::pi - 1e-3;
constexpr double kFirstRayRad = 1e-7;

/// A straight rig in the half plane of one azimuth: the camera's ray at `angle_rad` from the axis.
template <class T>
struct AxialSight {
  T s, z;              ///< on the mirror, from its vertex
  T along_s, along_z;  ///< after reflection
};

template <class T>
std::optional<AxialSight<T>> axial_sight(const Mirror<T>& mirror,
                                         double distance_m,
                                         const T& angle_rad) {
  using std::cos;
  using std::sin;
  const Vec3<T> ray{sin(angle_rad), T(0.0), cos(angle_rad)};
  const auto hit = meet(mirror, Vec3<T>{T(0.0), T(0.0), T(-distance_m)}, ray);
  if (!hit) return std::nullopt;
  const Vec3<T> along = reflect(ray, hit->normal);
  return AxialSight<T>{hit->at_m.x, hit->at_m.z, along.x, along.z};
}

/// The angle of the camera's ray to the rim; the widest ray where there is no rim.
double rim_angle_rad(const RigGeometry<double>& rig) {
  if (std::isfinite(rig.rim_radius_m)) {
    if (const auto sag = sag_m(rig.mirror, rig.rim_radius_m)) {
      return std::atan2(rig.rim_radius_m, rig.distance_m + *sag);
    }
  }
  return kLastRayRad;
}

/// Smallest angle in (low, high) at which the sight stops sinking or leaves the mirror.
double last_sinking_angle_rad(const RigGeometry<double>& rig, double high_rad) {
  const auto sinks = [&](double angle_rad) {
    const auto sight = axial_sight(rig.mirror, rig.distance_m, angle_rad);
    return sight && sight->along_z < 0.0;
  };
  if (sinks(high_rad)) return high_rad;
  double low = kFirstRayRad;
  double high = high_rad;
  while (high - low > 1e-15 * high) {
    const double middle = 0.5 * (low + high);
    if (middle <= low || middle >= high) break;
    (sinks(middle) ? low : high) = middle;
  }
  return low;
}

}  // namespace

std::optional<double> axial_range_m(const RigGeometry<double>& rig,
                                    double radius_px,
                                    double height_m) {
  if (!(radius_px >= 0.0)) return std::nullopt;
  const double angle_rad = std::atan2(radius_px, rig.focal_px);
  const auto sight = axial_sight(rig.mirror, rig.distance_m, angle_rad);
  if (!sight || sight->s > rig.rim_radius_m) return std::nullopt;
  const double drop = height_m - rig.eye_height_m - rig.distance_m - sight->z;
  if (!(sight->along_z * drop > 0.0)) return std::nullopt;
  return sight->s + sight->along_s / sight->along_z * drop;
}

std::optional<double> axial_radius_px(const RigGeometry<double>& rig,
                                      double range_m,
                                      double height_m) {
  using D = Dual<1>;
  const Mirror<D> mirror = rig.mirror.in<D>();
  const double target_z = height_m - rig.eye_height_m - rig.distance_m;
  // The miss is positive while the line of sight passes on the near side of the target, negative
  // beyond it; smooth through the horizon. A ray that leaves the mirror counts as beyond.
  const auto miss = [&](double angle_rad) -> std::optional<D> {
    const auto sight = axial_sight(mirror, rig.distance_m, D::variable(angle_rad, 0));
    if (!sight) return std::nullopt;
    return sight->along_s * (D(target_z) - sight->z) - sight->along_z * (D(range_m) - sight->s);
  };
  double low = kFirstRayRad;
  double high = rim_angle_rad(rig);
  const auto at_low = miss(low);
  if (!at_low || !(at_low->a > 0.0)) return std::nullopt;
  const auto at_high = miss(high);
  if (at_high && at_high->a > 0.0) return std::nullopt;
  double angle = low - at_low->a / at_low->d[0];
  if (!(angle > low && angle < high)) angle = 0.5 * (low + high);
  for (int i = 0; i < 200; ++i) {
    const auto m = miss(angle);
    double next = std::numeric_limits<double>::quiet_NaN();
    if (m && m->a > 0.0) {
      low = angle;
    } else {
      high = angle;
    }
    if (m) next = angle - m->a / m->d[0];
    if (!(next > low && next < high)) next = 0.5 * (low + high);
    const double step = std::abs(next - angle);
    angle = next;
    if (step <= 4e-16 * angle || high - low <= 4e-16 * high) break;
  }
  const auto sight = axial_sight(rig.mirror, rig.distance_m, angle);
  if (!sight) return std::nullopt;
  const double forward =
      sight->along_s * (range_m - sight->s) + sight->along_z * (target_z - sight->z);
  if (!(forward > 0.0)) return std::nullopt;
  return rig.focal_px * std::tan(angle);
}

std::optional<double> horizon_radius_px(const RigGeometry<double>& rig) {
  const double rim = rim_angle_rad(rig);
  const double last = last_sinking_angle_rad(rig, rim);
  if (last >= rim) return std::nullopt;
  return rig.focal_px * std::tan(last);
}

double last_radius_px(const RigGeometry<double>& rig) {
  return rig.focal_px * std::tan(last_sinking_angle_rad(rig, rim_angle_rad(rig)));
}

std::optional<MissJacobian> miss_jacobian(
    const RigGeometry<double>& rig, Pixel<double> at, double x_m, double y_m, double height_m) {
  using D = Dual<2>;
  MissJacobian result;
  const Floor<double> axes = floor_axes_from_robot(rig, x_m, y_m);
  const double range_m = std::hypot(axes.x_m, axes.y_m);
  if (range_m > 0.0) {
    result.out_x = axes.x_m / range_m;
    result.out_y = axes.y_m / range_m;
  }
  const double below_m = std::abs(height_m - rig.eye_height_m - rig.distance_m);
  result.by_distance = range_m > below_m;
  const RigGeometry<D> dual = rig.in<D>();
  const internal::Aim<D> aim =
      internal::aim_at(dual, D(x_m), D(y_m), D(height_m), result.out_x, result.out_y);
  const auto miss = internal::miss(dual,
                                   Pixel<D>{D::variable(at.u_px, 0), D::variable(at.v_px, 1)},
                                   aim.target,
                                   aim.up,
                                   aim.out,
                                   aim.side,
                                   result.by_distance);
  if (!miss) return std::nullopt;
  result.miss = {(*miss)[0].a, (*miss)[1].a};
  result.du0 = (*miss)[0].d[0];
  result.dv0 = (*miss)[0].d[1];
  result.du1 = (*miss)[1].d[0];
  result.dv1 = (*miss)[1].d[1];
  return result;
}

std::optional<Pixel<double>> floor_to_pixel(const RigGeometry<double>& rig,
                                            double x_m,
                                            double y_m,
                                            double height_m) {
  RigGeometry<double> endless = rig;
  endless.rim_radius_m = std::numeric_limits<double>::infinity();
  const Floor<double> axes = floor_axes_from_robot(rig, x_m, y_m);
  const double range_m = std::hypot(axes.x_m, axes.y_m);
  const std::optional<double> radius_px = axial_radius_px(endless, range_m, height_m);
  if (!radius_px) return std::nullopt;
  const double out_x = range_m > 0.0 ? axes.x_m / range_m : 1.0;
  const double out_y = range_m > 0.0 ? axes.y_m / range_m : 0.0;
  const double shift_px = rig.focal_px / rig.distance_m;
  Pixel<double> at{rig.cu_px + *radius_px * out_x + shift_px * rig.shift_x_m,
                   rig.cv_px + *radius_px * out_y + shift_px * rig.shift_y_m};
  std::optional<MissJacobian> j = miss_jacobian(endless, at, x_m, y_m, height_m);
  // The axial start may lie beyond the mirror's edge of a tilted rig: come inwards until it does
  // not.
  for (int i = 0; i < 20 && !j; ++i) {
    at.u_px = rig.cu_px + 0.95 * (at.u_px - rig.cu_px);
    at.v_px = rig.cv_px + 0.95 * (at.v_px - rig.cv_px);
    j = miss_jacobian(endless, at, x_m, y_m, height_m);
  }
  if (!j) return std::nullopt;
  bool closed = false;
  for (int i = 0; i < 50 && !closed; ++i) {
    const double det = j->du0 * j->dv1 - j->dv0 * j->du1;
    if (det == 0.0) return std::nullopt;
    const double step_u = (j->dv1 * j->miss[0] - j->dv0 * j->miss[1]) / det;
    const double step_v = (j->du0 * j->miss[1] - j->du1 * j->miss[0]) / det;
    const double step_px = std::hypot(step_u, step_v);
    if (step_px < 1e-9) closed = true;
    // Half the step while it leaves the mirror or makes the miss grow.
    double share = 1.0;
    const double before = std::hypot(j->miss[0], j->miss[1]);
    std::optional<MissJacobian> next;
    Pixel<double> there = at;
    for (int k = 0; k < 30; ++k, share *= 0.5) {
      there = {at.u_px - share * step_u, at.v_px - share * step_v};
      next = miss_jacobian(endless, there, x_m, y_m, height_m);
      if (next && (closed || std::hypot(next->miss[0], next->miss[1]) < before)) break;
    }
    if (!next) return std::nullopt;
    if (!closed && std::hypot(next->miss[0], next->miss[1]) >= before) {
      closed = step_px < 1e-6;  // at the noise floor of the arithmetic
      if (!closed) return std::nullopt;
      break;
    }
    at = there;
    j = next;
  }
  if (!closed) return std::nullopt;
  // In front of the mirror, and not beyond its rim.
  const auto sight = sight_of(rig, at.u_px, at.v_px);
  if (!sight) return std::nullopt;
  const auto aim = internal::aim_at(rig, x_m, y_m, height_m, out_x, out_y);
  if (!(dot(sight->along, aim.target - sight->from_m) > 0.0)) return std::nullopt;
  return at;
}

}  // namespace rondel::optics
