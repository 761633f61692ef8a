#pragma once

#include <cmath>

namespace rondel::scene {

/// A point or direction in space, or a colour in linear light (x red, y green, z blue).
struct Vec3 {
  double x = 0.0;
  double y = 0.0;
  double z = 0.0;

  friend constexpr Vec3 operator+(Vec3 a, Vec3 b) { return {a.x + b.x, a.y + b.y, a.z + b.z}; }
  friend constexpr Vec3 operator-(Vec3 a, Vec3 b) { return {a.x - b.x, a.y - b.y, a.z - b.z}; }
  friend constexpr Vec3 operator-(Vec3 a) { return {-a.x, -a.y, -a.z}; }
  friend constexpr Vec3 operator*(double k, Vec3 a) { return {k * a.x, k * a.y, k * a.z}; }
  /// Component by component: a surface's colour under a light's colour.
  friend constexpr Vec3 operator*(Vec3 a, Vec3 b) { return {a.x * b.x, a.y * b.y, a.z * b.z}; }
  constexpr Vec3& operator+=(Vec3 b) { return *this = *this + b; }
  friend constexpr bool operator==(const Vec3&, const Vec3&) = default;
};

[[nodiscard]] constexpr double dot(Vec3 a, Vec3 b) { return a.x * b.x + a.y * b.y + a.z * b.z; }
[[nodiscard]] constexpr Vec3 cross(Vec3 a, Vec3 b) {
  return {a.y * b.z - a.z * b.y, a.z * b.x - a.x * b.z, a.x * b.y - a.y * b.x};
}
[[nodiscard]] inline double length(Vec3 a) { return std::sqrt(dot(a, a)); }
[[nodiscard]] inline Vec3 unit(Vec3 a) { return (1.0 / length(a)) * a; }

/// A rotation, rows of its matrix.
struct Rotation {
  Vec3 row_x{1.0, 0.0, 0.0};
  Vec3 row_y{0.0, 1.0, 0.0};
  Vec3 row_z{0.0, 0.0, 1.0};

  [[nodiscard]] constexpr Vec3 operator()(Vec3 a) const {
    return {dot(row_x, a), dot(row_y, a), dot(row_z, a)};
  }
  [[nodiscard]] constexpr Rotation inverse() const {
    return {{row_x.x, row_y.x, row_z.x}, {row_x.y, row_y.y, row_z.y}, {row_x.z, row_y.z, row_z.z}};
  }
};

/// Rotation by the length of `vector` (rad) about its direction (Rodrigues).
[[nodiscard]] inline Rotation rotation_by(Vec3 vector) {
  const double angle = length(vector);
  if (angle == 0.0) return {};
  const Vec3 k = (1.0 / angle) * vector;
  const double c = std::cos(angle);
  const double s = std::sin(angle);
  const double t = 1.0 - c;
  return {{c + t * k.x * k.x, t * k.x * k.y - s * k.z, t * k.x * k.z + s * k.y},
          {t * k.x * k.y + s * k.z, c + t * k.y * k.y, t * k.y * k.z - s * k.x},
          {t * k.x * k.z - s * k.y, t * k.y * k.z + s * k.x, c + t * k.z * k.z}};
}

}  // namespace rondel::scene
