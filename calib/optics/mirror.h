#pragma once

#include <array>
#include <cmath>
#include <memory>
#include <optional>

#include "calib/optics/profile.h"
#include "calib/optics/scalar.h"

namespace rondel::optics {

enum class MirrorKind { conic, cone, profile };

/// A convex mirror, a surface of revolution z = sag(s) about its own axis, vertex at the origin,
/// opening away from the camera (the camera is on the side z < 0).
///   conic    sag(s) = c s^2 / (1 + sqrt(1 - (1+K) c^2 s^2)), c = 1 / vertex_radius_m > 0, any K
///   cone     sag(s) = s tan(slope_rad), slope in (0, pi/2)
///   profile  a smoothed measured profile, moved along its own modes of uncertainty by
///            profile_modes (standard deviations; 0 is the measured profile itself)
/// Only the fields of its kind count.
template <class T>
struct Mirror {
  MirrorKind kind = MirrorKind::conic;
  T vertex_radius_m{0.0};
  T conic_constant{0.0};
  T slope_rad{0.0};
  std::shared_ptr<const Profile> profile;
  std::array<T, kProfileModes> profile_modes{};

  /// The same mirror in another scalar, derivatives dropped.
  template <class U>
  [[nodiscard]] Mirror<U> in() const {
    Mirror<U> m;
    m.kind = kind;
    m.vertex_radius_m = U(value_of(vertex_radius_m));
    m.conic_constant = U(value_of(conic_constant));
    m.slope_rad = U(value_of(slope_rad));
    m.profile = profile;
    for (std::size_t i = 0; i < kProfileModes; ++i) {
      m.profile_modes[i] = U(value_of(profile_modes[i]));
    }
    return m;
  }
};

/// Conics and cones are one quadric: alpha s^2 + beta z^2 - 2 gamma z = 0, on the sheet where
/// gamma - beta z > 0.
template <class T>
struct Quadric {
  T alpha, beta, gamma;
};

/// Of a conic or a cone; must not be asked of a profile.
template <class T>
[[nodiscard]] Quadric<T> quadric_of(const Mirror<T>& mirror) {
  using std::tan;
  if (mirror.kind == MirrorKind::cone) {
    const T k = tan(mirror.slope_rad);
    return {k * k, T(-1.0), T(0.0)};
  }
  return {T(1.0), T(1.0) + mirror.conic_constant, mirror.vertex_radius_m};
}

/// Height of the surface over its vertex plane at distance `s_m` >= 0 from the axis, m. No answer
/// beyond the surface's widest place or the measured profile's end.
template <class T>
[[nodiscard]] std::optional<T> sag_m(const Mirror<T>& mirror, const T& s_m) {
  using std::sqrt;
  using std::tan;
  switch (mirror.kind) {
    case MirrorKind::cone:
      return s_m * tan(mirror.slope_rad);
    case MirrorKind::conic: {
      const T c = T(1.0) / mirror.vertex_radius_m;
      const T under = T(1.0) - (T(1.0) + mirror.conic_constant) * c * c * s_m * s_m;
      if (!(value_of(under) > 0.0)) return std::nullopt;
      return c * s_m * s_m / (T(1.0) + sqrt(under));
    }
    case MirrorKind::profile:
      if (!mirror.profile->covers(value_of(s_m))) return std::nullopt;
      return mirror.profile->at(s_m, mirror.profile_modes).sag_m;
  }
  return std::nullopt;
}

/// Where a ray meets the mirror, and the surface's normal there: not of unit length, on the
/// camera's side (z < 0).
template <class T>
struct Hit {
  Vec3<T> at_m;
  Vec3<T> normal;
};

namespace internal {

/// Closed form (the quadratic without cancellation), nearest root in front on the right sheet.
template <class T>
[[nodiscard]] std::optional<Hit<T>> meet_quadric(const Quadric<T>& q,
                                                 const Vec3<T>& from_m,
                                                 const Vec3<T>& along) {
  using std::sqrt;
  const T a = q.alpha * (along.x * along.x + along.y * along.y) + q.beta * along.z * along.z;
  const T b =
      q.alpha * (from_m.x * along.x + from_m.y * along.y) + (q.beta * from_m.z - q.gamma) * along.z;
  const T c = q.alpha * (from_m.x * from_m.x + from_m.y * from_m.y) +
              (q.beta * from_m.z - T(2.0) * q.gamma) * from_m.z;
  const T discriminant = b * b - a * c;
  if (!(value_of(discriminant) > 0.0)) return std::nullopt;
  const T root = sqrt(discriminant);
  const T w = value_of(b) < 0.0 ? root - b : -(b + root);
  // The two roots are w / a and c / w; w is never 0 because the discriminant is positive.
  const double t_far = value_of(a) != 0.0 ? value_of(w) / value_of(a) : -1.0;
  const double t_near = value_of(c) / value_of(w);
  const auto on_sheet = [&](double t) {
    const double z = value_of(from_m.z) + t * value_of(along.z);
    return t > 0.0 && value_of(q.gamma) - value_of(q.beta) * z > 0.0;
  };
  const bool far_ok = on_sheet(t_far);
  const bool near_ok = on_sheet(t_near);
  if (!far_ok && !near_ok) return std::nullopt;
  const bool take_near = near_ok && (!far_ok || t_near < t_far);
  const T t = take_near ? c / w : w / a;
  Hit<T> hit;
  hit.at_m = from_m + t * along;
  hit.normal = {q.alpha * hit.at_m.x, q.alpha * hit.at_m.y, q.beta * hit.at_m.z - q.gamma};
  return hit;
}

/// Bracketed Newton on plain numbers, then one Newton step in T which carries the derivatives.
template <class T>
[[nodiscard]] std::optional<Hit<T>> meet_profile(const Mirror<T>& mirror,
                                                 const Vec3<T>& from_m,
                                                 const Vec3<T>& along) {
  using std::sqrt;
  const Profile& profile = *mirror.profile;
  std::array<double, kProfileModes> modes{};
  for (std::size_t i = 0; i < kProfileModes; ++i) modes[i] = value_of(mirror.profile_modes[i]);
  const std::optional<double> t0 = profile.meet(value_of(from_m.x),
                                                value_of(from_m.y),
                                                value_of(from_m.z),
                                                value_of(along.x),
                                                value_of(along.y),
                                                value_of(along.z),
                                                modes);
  if (!t0) return std::nullopt;
  const auto distance = [&](const Vec3<T>& p) { return sqrt(p.x * p.x + p.y * p.y); };
  Vec3<T> p = from_m + T(*t0) * along;
  T s = distance(p);
  auto surface = profile.at(s, mirror.profile_modes);
  const double s0 = value_of(s);
  const double climb = value_of(along.z) -
                       value_of(surface.slope) *
                           (value_of(p.x) * value_of(along.x) + value_of(p.y) * value_of(along.y)) /
                           s0;
  if (!(climb > 0.0)) return std::nullopt;
  const T t = T(*t0) - (p.z - surface.sag_m) / climb;
  Hit<T> hit;
  hit.at_m = from_m + t * along;
  s = distance(hit.at_m);
  surface = profile.at(s, mirror.profile_modes);
  hit.normal = {surface.slope * hit.at_m.x / s, surface.slope * hit.at_m.y / s, T(-1.0)};
  return hit;
}

}  // namespace internal

/// Where the ray from `from_m` (on the camera's side) along `along` first meets the mirror's front.
/// No answer where it passes by, and on the apex of a cone, which has no normal.
template <class T>
[[nodiscard]] std::optional<Hit<T>> meet(const Mirror<T>& mirror,
                                         const Vec3<T>& from_m,
                                         const Vec3<T>& along) {
  if (mirror.kind == MirrorKind::profile) return internal::meet_profile(mirror, from_m, along);
  return internal::meet_quadric(quadric_of(mirror), from_m, along);
}

/// The direction after reflection at a surface with this normal (of any length).
template <class T>
[[nodiscard]] Vec3<T> reflect(const Vec3<T>& along, const Vec3<T>& normal) {
  const T k = T(2.0) * dot(along, normal) / dot(normal, normal);
  return along - k * normal;
}

}  // namespace rondel::optics
