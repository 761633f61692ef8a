#pragma once

namespace rondel::optics {

/// A value with one standard deviation.
struct Spread {
  double value = 0.0;
  double sd = 0.0;
};

/// The optical form of a conic mirror, with the correlation that its makers' numbers leave.
struct OpticalConic {
  Spread vertex_radius_m;
  Spread conic_constant;
  double correlation = 0.0;  ///< of the two, in [-1, 1]; 0 where one of them is exact
};

// The ways in which drawings give a conic (lengths in m, > 0). Standard deviations by linear
// propagation, the given values taken as independent. Sources: any text on conics; for the
// hyperboloid Baker and Nayar 1999.

/// Hyperboloid with semi-axes a along the mirror's axis and b across: 1/c = b^2/a,
/// K = -(1 + b^2/a^2).
[[nodiscard]] OpticalConic from_hyperbola(Spread a_m, Spread b_m);

/// Ellipsoid with semi-axes a along the mirror's axis and b across (b > a: oblate): 1/c = b^2/a,
/// K = b^2/a^2 - 1.
[[nodiscard]] OpticalConic from_ellipse(Spread a_m, Spread b_m);

/// Eccentricity e (distance to the focus over distance to the directrix, 1 a paraboloid, above 1 a
/// hyperboloid) and vertex radius: K = -e^2.
[[nodiscard]] OpticalConic from_eccentricity(Spread e, Spread vertex_radius_m);

/// Eccentricity and the vertex's distance to the near focus: 1/c = f (1 + e).
[[nodiscard]] OpticalConic from_focus(Spread e, Spread focus_m);

/// Eccentricity and the vertex's distance to the near directrix: 1/c = d e (1 + e).
[[nodiscard]] OpticalConic from_directrix(Spread e, Spread directrix_m);

/// The vertex's distances to its near focus and directrix: e = f / d. At the vertex of a hyperbola
/// with e = 3/2 the focus is 3 parts away and the directrix 2.
[[nodiscard]] OpticalConic from_focus_and_directrix(Spread focus_m, Spread directrix_m);

/// Eccentricity and the distance between near focus and directrix: 1/c = e q.
[[nodiscard]] OpticalConic from_focus_to_directrix(Spread e, Spread gap_m);

}  // namespace rondel::optics
