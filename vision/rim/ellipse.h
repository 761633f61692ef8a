#pragma once

#include <Eigen/Core>
#include <optional>
#include <span>
#include <vector>

#include "calib/base/geometry.h"
#include "calib/venue/centre_result.h"

namespace rondel::vision {

/// The curve centre + shape * (cos t, sin t), `shape` symmetric and positive definite: every
/// ellipse once, circles without a degenerate angle. Parameters in the order
/// centre u, centre v, shape uu, shape vv, shape uv, all px.
struct Ellipse {
  Eigen::Matrix<double, 5, 1> p = Eigen::Matrix<double, 5, 1>::Zero();

  [[nodiscard]] ImagePoint centre() const { return {p[0], p[1]}; }
  [[nodiscard]] double mean_radius_px() const { return 0.5 * (p[2] + p[3]); }
  [[nodiscard]] RimEllipse axes() const;
  /// Distance from the ellipse's own centre to the curve in direction `azimuth_rad`, u towards v.
  [[nodiscard]] double radius_px(double azimuth_rad) const;
  /// Signed distance to the nearest point of the curve, positive outside, and its derivative by p.
  /// The derivative follows from the foot point alone, since the foot is stationary.
  [[nodiscard]] double distance_px(ImagePoint at,
                                   Eigen::Matrix<double, 5, 1>* jacobian = nullptr) const;
};

[[nodiscard]] Ellipse circle(ImagePoint centre, double radius_px);
[[nodiscard]] Ellipse ellipse_of(ImagePoint centre, const RimEllipse& axes);

/// What is known of the shape before any point is seen: half the difference of shape uu and vv, and
/// shape uv, are normal about 0 with this deviation relative to the radius. 0: nothing is known.
struct RoundnessPrior {
  double sd_relative = 0.0;
};

struct EllipseFit {
  Ellipse ellipse;
  /// Of p. Neighbouring points' errors are correlated (a scene's edge bends many of them alike):
  /// the middle of the sandwich sums their products over neighbours (Newey and West, 1987).
  Eigen::Matrix<double, 5, 5> cov_px2;
  double noise_px = 0.0;       ///< robust deviation of a point from the curve
  std::vector<double> weight;  ///< of each point, 0..1; near 0: no part of the ellipse
};

/// Least squares of the points' distances to the curve (Ceres), Cauchy's loss at three times the
/// noise, the noise from the residuals. `points` are in order along the curve, about evenly, for
/// the sake of the covariance. `neighbours`: over how many points errors hang together.
/// None when fewer than 6 points, or the fit runs away.
[[nodiscard]] std::optional<EllipseFit> fit_ellipse(std::span<const ImagePoint> points,
                                                    const Ellipse& start,
                                                    RoundnessPrior prior = {},
                                                    int neighbours = 12);

}  // namespace rondel::vision
