#pragma once

#include <array>
#include <vector>

#include "calib/link/picture.h"

// Centre, turn and first harmonics of what is seen in the image.
namespace rondel::link {

/// c[0] + c[1] s of two components, s = d^2 / scale.
using SlowPair = std::array<std::array<double, 2>, 2>;

/// Which way and how far bearings are turned against the image.
struct Turn {
  bool mirrored = true;
  double heading_rad = 0.0;
  /// Direction in the image at which `bearing_rad` is seen.
  [[nodiscard]] double azimuth(double bearing_rad) const {
    return mirrored ? bearing_rad - heading_rad : heading_rad - bearing_rad;
  }
};

/// Least squares for d^2 + A(s) d_u + B(s) d_v = one number per curve, A and B of `degree` 0 or 1;
/// d from (cu, cv), all in 1/kSubpixel px.
[[nodiscard]] SlowPair fit_range_harmonics(
    const std::vector<const Picture*>& pictures, double cu, double cv, double scale, int degree);

struct BearingFit {
  SlowPair displacement{};
  double azimuth_off_rad = 0.0;
};
/// Least squares for the displacement (E(s), F(s)) after which directions are those of the
/// bearings, and for what the heading is off where `with_heading`.
[[nodiscard]] BearingFit fit_bearing_harmonics(const std::vector<const Picture*>& pictures,
                                               const Turn& turn,
                                               double cu,
                                               double cv,
                                               double scale,
                                               bool with_heading);

/// Handedness and mean heading.
[[nodiscard]] Turn find_turn(const std::vector<const Picture*>& pictures, double cu, double cv);

}  // namespace rondel::link
