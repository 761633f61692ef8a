#pragma once

#include <cmath>
#include <optional>

#include "calib/optics/scalar.h"
#include "calib/optics/trace.h"

namespace rondel::optics {

/// The unified sphere model of central mirror cameras (Geyer and Daniilidis 2000), in the form of
/// Mei and Rives 2007: a direction is put on the unit sphere and projected from a point `xi` behind
/// its centre. xi = 0 is a pinhole, 1 a paraboloid, 2e/(1+e^2) a hyperboloid of eccentricity e.
/// The model's z axis is the direction which the image's centre shows: straight down on a robot.
template <class T>
struct SphereModel {
  T xi{0.0};
  T gamma_u_px{0.0};  ///< image scale along u; for a true mirror gamma_u = gamma_v
  T gamma_v_px{0.0};
  T skew_px{0.0};
  T cu_px{0.0};
  T cv_px{0.0};
  T k1{0.0}, k2{0.0};  ///< radial distortion of the normalised image
  T p1{0.0}, p2{0.0};  ///< decentring distortion
};

/// Where the direction (any length) appears. No answer where the projection's ray does not come
/// out: z / |d| + xi <= 0, or, for xi > 1, beyond the sphere's outline 1 + xi z / |d| <= 0.
template <class T>
[[nodiscard]] std::optional<Pixel<T>> project(const SphereModel<T>& model,
                                              const Vec3<T>& direction) {
  using std::sqrt;
  const T length = sqrt(dot(direction, direction));
  if (!(value_of(length) > 0.0)) return std::nullopt;
  const T depth = direction.z / length + model.xi;
  if (!(value_of(depth) > 0.0)) return std::nullopt;
  if (value_of(model.xi) > 1.0 &&
      !(value_of(direction.z) * value_of(model.xi) + value_of(length) > 0.0)) {
    return std::nullopt;
  }
  const T x = direction.x / (length * depth);
  const T y = direction.y / (length * depth);
  const T r2 = x * x + y * y;
  const T radial = T(1.0) + (model.k2 * r2 + model.k1) * r2;
  const T xd = x * radial + T(2.0) * model.p1 * x * y + model.p2 * (r2 + T(2.0) * x * x);
  const T yd = y * radial + model.p1 * (r2 + T(2.0) * y * y) + T(2.0) * model.p2 * x * y;
  return Pixel<T>{model.gamma_u_px * xd + model.skew_px * yd + model.cu_px,
                  model.gamma_v_px * yd + model.cv_px};
}

/// The direction, of unit length, which a pixel of a model *without distortion* shows. No answer
/// beyond the sphere's outline (only xi > 1 has one).
template <class T>
[[nodiscard]] std::optional<Vec3<T>> back_project(const SphereModel<T>& model,
                                                  const Pixel<T>& pixel) {
  using std::sqrt;
  const T y = (pixel.v_px - model.cv_px) / model.gamma_v_px;
  const T x = (pixel.u_px - model.cu_px - model.skew_px * y) / model.gamma_u_px;
  const T r2 = x * x + y * y;
  const T under = T(1.0) + (T(1.0) - model.xi * model.xi) * r2;
  if (!(value_of(under) > 0.0)) return std::nullopt;
  const T lift = (model.xi + sqrt(under)) / (r2 + T(1.0));
  return Vec3<T>{lift * x, lift * y, lift - model.xi};
}

}  // namespace rondel::optics
