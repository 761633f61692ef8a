#include "calib/optics/conic_forms.h"

#include <cmath>

namespace rondel::optics {
namespace {

/// Radius and constant with their derivatives with respect to the two given values.
OpticalConic propagate(double radius_m,
                       double constant,
                       double radius_d1,
                       double radius_d2,
                       double constant_d1,
                       double constant_d2,
                       double sd1,
                       double sd2) {
  OpticalConic conic;
  conic.vertex_radius_m = {radius_m, std::hypot(radius_d1 * sd1, radius_d2 * sd2)};
  conic.conic_constant = {constant, std::hypot(constant_d1 * sd1, constant_d2 * sd2)};
  const double product = conic.vertex_radius_m.sd * conic.conic_constant.sd;
  if (product > 0.0) {
    conic.correlation =
        (radius_d1 * constant_d1 * sd1 * sd1 + radius_d2 * constant_d2 * sd2 * sd2) / product;
  }
  return conic;
}

}  // namespace

OpticalConic from_hyperbola(Spread a_m, Spread b_m) {
  const double a = a_m.value;
  const double b = b_m.value;
  const double q = b / a;
  return propagate(
      b * q, -(1.0 + q * q), -q * q, 2.0 * q, 2.0 * q * q / a, -2.0 * q / a, a_m.sd, b_m.sd);
}

OpticalConic from_ellipse(Spread a_m, Spread b_m) {
  const double a = a_m.value;
  const double b = b_m.value;
  const double q = b / a;
  return propagate(
      b * q, q * q - 1.0, -q * q, 2.0 * q, -2.0 * q * q / a, 2.0 * q / a, a_m.sd, b_m.sd);
}

OpticalConic from_eccentricity(Spread e, Spread vertex_radius_m) {
  return propagate(vertex_radius_m.value,
                   -e.value * e.value,
                   0.0,
                   1.0,
                   -2.0 * e.value,
                   0.0,
                   e.sd,
                   vertex_radius_m.sd);
}

OpticalConic from_focus(Spread e, Spread focus_m) {
  return propagate(focus_m.value * (1.0 + e.value),
                   -e.value * e.value,
                   focus_m.value,
                   1.0 + e.value,
                   -2.0 * e.value,
                   0.0,
                   e.sd,
                   focus_m.sd);
}

OpticalConic from_directrix(Spread e, Spread directrix_m) {
  return propagate(directrix_m.value * e.value * (1.0 + e.value),
                   -e.value * e.value,
                   directrix_m.value * (1.0 + 2.0 * e.value),
                   e.value * (1.0 + e.value),
                   -2.0 * e.value,
                   0.0,
                   e.sd,
                   directrix_m.sd);
}

OpticalConic from_focus_and_directrix(Spread focus_m, Spread directrix_m) {
  const double f = focus_m.value;
  const double d = directrix_m.value;
  const double e = f / d;
  return propagate(f * (1.0 + e),
                   -e * e,
                   1.0 + 2.0 * e,
                   -e * e,
                   -2.0 * e / d,
                   2.0 * e * e / d,
                   focus_m.sd,
                   directrix_m.sd);
}

OpticalConic from_focus_to_directrix(Spread e, Spread gap_m) {
  return propagate(e.value * gap_m.value,
                   -e.value * e.value,
                   gap_m.value,
                   e.value,
                   -2.0 * e.value,
                   0.0,
                   e.sd,
                   gap_m.sd);
}

}  // namespace rondel::optics
