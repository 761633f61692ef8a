#pragma once

#include <array>
#include <cmath>
#include <cstddef>

namespace rondel::optics {

/// The plain number behind a scalar: a double itself, or the value part `.a` of a dual number
/// (ceres::Jet has the same shape). Branches in this room look at values only, so every function
/// here works with both.
template <class T>
[[nodiscard]] constexpr double value_of(const T& x) {
  if constexpr (requires { x.a; }) {
    return x.a;
  } else {
    return x;
  }
}

/// A number with N first derivatives, for the small Jacobians of this room.
template <std::size_t N>
struct Dual {
  double a = 0.0;
  std::array<double, N> d{};

  Dual() = default;
  Dual(double value) : a(value) {}  // NOLINT(google-explicit-constructor): a number is a constant
  /// The variable number `index` at `value`.
  static Dual variable(double value, std::size_t index) {
    Dual x(value);
    x.d[index] = 1.0;
    return x;
  }

  /// f(x) with f'(x) = slope.
  [[nodiscard]] Dual chain(double value, double slope) const {
    Dual r(value);
    for (std::size_t i = 0; i < N; ++i) r.d[i] = slope * d[i];
    return r;
  }
  friend Dual operator+(const Dual& x, const Dual& y) {
    Dual r(x.a + y.a);
    for (std::size_t i = 0; i < N; ++i) r.d[i] = x.d[i] + y.d[i];
    return r;
  }
  friend Dual operator-(const Dual& x, const Dual& y) {
    Dual r(x.a - y.a);
    for (std::size_t i = 0; i < N; ++i) r.d[i] = x.d[i] - y.d[i];
    return r;
  }
  friend Dual operator*(const Dual& x, const Dual& y) {
    Dual r(x.a * y.a);
    for (std::size_t i = 0; i < N; ++i) r.d[i] = x.d[i] * y.a + x.a * y.d[i];
    return r;
  }
  friend Dual operator/(const Dual& x, const Dual& y) {
    const double q = x.a / y.a;
    Dual r(q);
    for (std::size_t i = 0; i < N; ++i) r.d[i] = (x.d[i] - q * y.d[i]) / y.a;
    return r;
  }
  friend Dual operator-(const Dual& x) { return x.chain(-x.a, -1.0); }
  friend Dual sqrt(const Dual& x) {
    const double root = std::sqrt(x.a);
    return x.chain(root, 0.5 / root);
  }
  friend Dual cos(const Dual& x) { return x.chain(std::cos(x.a), -std::sin(x.a)); }
  friend Dual sin(const Dual& x) { return x.chain(std::sin(x.a), std::cos(x.a)); }
  friend Dual tan(const Dual& x) {
    const double t = std::tan(x.a);
    return x.chain(t, 1.0 + t * t);
  }
};

/// A vector in space.
template <class T>
struct Vec3 {
  T x{0.0}, y{0.0}, z{0.0};
  friend Vec3 operator+(const Vec3& p, const Vec3& q) { return {p.x + q.x, p.y + q.y, p.z + q.z}; }
  friend Vec3 operator-(const Vec3& p, const Vec3& q) { return {p.x - q.x, p.y - q.y, p.z - q.z}; }
  friend Vec3 operator*(const T& s, const Vec3& p) { return {s * p.x, s * p.y, s * p.z}; }
};

template <class T>
[[nodiscard]] T dot(const Vec3<T>& p, const Vec3<T>& q) {
  return p.x * q.x + p.y * q.y + p.z * q.z;
}

/// The vector (x, y, 1) brought to unit length: a direction near +z given by two small numbers.
template <class T>
[[nodiscard]] Vec3<T> unit_from_slopes(const T& x, const T& y) {
  using std::sqrt;
  const T scale = T(1.0) / sqrt(x * x + y * y + T(1.0));
  return {x * scale, y * scale, scale};
}

/// Turns `v` by the smallest rotation that brings the unit vector `from` onto +z. `from` must not
/// be -z. Written without a cross product, so it holds in left-handed axes too.
template <class T>
[[nodiscard]] Vec3<T> turn_onto_z(const Vec3<T>& from, const Vec3<T>& v) {
  const T along = dot(from, v);
  const T k = (along + v.z) / (T(1.0) + from.z);
  return {v.x - k * from.x, v.y - k * from.y, v.z - k * (from.z + T(1.0)) + T(2.0) * along};
}

/// The inverse of turn_onto_z: the rotation that brings +z onto `onto`.
template <class T>
[[nodiscard]] Vec3<T> turn_from_z(const Vec3<T>& onto, const Vec3<T>& v) {
  const T along = dot(onto, v);
  const T k = (along + v.z) / (T(1.0) + onto.z);
  const T twice = T(2.0) * v.z;
  return {v.x - k * onto.x + twice * onto.x,
          v.y - k * onto.y + twice * onto.y,
          v.z - k * (onto.z + T(1.0)) + twice * onto.z};
}

}  // namespace rondel::optics
