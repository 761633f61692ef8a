#include "calib/range/range_curve.h"

#include <Eigen/Eigenvalues>
#include <algorithm>
#include <cmath>
#include <numbers>
#include <utility>

namespace rondel::range {

RangeCurve::RangeCurve(std::shared_ptr<const Model> model,
                       Params params,
                       Eigen::MatrixXd covariance,
                       double t95,
                       ImagePoint centre,
                       double radius_limit_px)
    : model_(std::move(model)),
      params_(std::move(params)),
      covariance_(std::move(covariance)),
      t95_(t95),
      centre_(centre),
      radius_limit_px_(radius_limit_px) {}

std::optional<FloorSpot> RangeCurve::floor_at(ImagePoint at, double height_m) const {
  if (std::hypot(at.u_px - centre_.u_px, at.v_px - centre_.v_px) > radius_limit_px_) {
    return std::nullopt;
  }
  const auto place = model_->place(params_, at, height_m);
  if (!place) return std::nullopt;
  return to_spot(*place);
}

std::optional<ImagePoint> RangeCurve::pixel_of(FloorSpot spot, double height_m) const {
  const auto pixel = model_->pixel(params_, to_point(spot), height_m);
  if (!pixel ||
      std::hypot(pixel->u_px - centre_.u_px, pixel->v_px - centre_.v_px) > radius_limit_px_) {
    return std::nullopt;
  }
  return pixel;
}

std::optional<FloorEstimate> RangeCurve::floor_with_band(ImagePoint at, double height_m) const {
  if (std::hypot(at.u_px - centre_.u_px, at.v_px - centre_.v_px) > radius_limit_px_) {
    return std::nullopt;
  }
  const auto placed = model_->locate(params_, at, height_m);
  if (!placed) return std::nullopt;
  FloorEstimate e;
  e.spot = to_spot(placed->at);
  const double r = std::max(e.spot.range_m, 1e-9);
  const Eigen::Matrix2d place = placed->by_params * covariance_ * placed->by_params.transpose();
  const Eigen::Vector2d out(placed->at.x_m / r, placed->at.y_m / r);
  const Eigen::Vector2d side(-out[1], out[0]);
  e.range_sd_m = std::sqrt(std::max(0.0, out.dot(place * out)));
  e.bearing_sd_rad = std::sqrt(std::max(0.0, side.dot(place * side))) / r;
  const double stretch = std::exp(std::min(t95_ * e.range_sd_m / r, 50.0));
  e.band95_low_m = e.spot.range_m / stretch;
  e.band95_high_m = e.spot.range_m * stretch;
  return e;
}

std::optional<optics::RigGeometry<double>> RangeCurve::rig() const { return model_->rig(params_); }

std::vector<optics::RigGeometry<double>> RangeCurve::rig_modes() const {
  std::vector<optics::RigGeometry<double>> modes;
  if (!rig()) return modes;
  Eigen::VectorXd scale(params_.size());
  for (Eigen::Index i = 0; i < scale.size(); ++i) {
    scale[i] = model_->parameters()[static_cast<std::size_t>(i)].scale;
  }
  const Eigen::MatrixXd scaled =
      scale.cwiseInverse().asDiagonal() * covariance_ * scale.cwiseInverse().asDiagonal();
  const Eigen::SelfAdjointEigenSolver<Eigen::MatrixXd> eigen(scaled);
  for (Eigen::Index k = 0; k < scale.size(); ++k) {
    const Params moved = params_ + scale.cwiseProduct(eigen.eigenvectors().col(k)) *
                                       std::sqrt(std::max(0.0, eigen.eigenvalues()[k]));
    if (const auto rig = model_->rig(moved)) modes.push_back(*rig);
  }
  return modes;
}

double reach_m(const RangeCurve& curve,
               const ToleranceSpec& tolerance,
               double height_m,
               double from_m,
               double far_m) {
  constexpr int kBearings = 24;
  constexpr double kStep = 1.02;
  double reached = 0.0;
  for (double range = from_m; range <= far_m * 1.0000001; range *= kStep) {
    bool seen = false;
    for (int k = 0; k < kBearings; ++k) {
      const double bearing = wrap_angle(2.0 * std::numbers::pi * k / kBearings);
      const auto pixel = curve.pixel_of({range, bearing}, height_m);
      if (!pixel) continue;
      const auto e = curve.floor_with_band(*pixel, height_m);
      if (!e) continue;
      seen = true;
      if (e->band95_high_m - range > tolerance.range_m_at(range)) return reached;
    }
    if (seen) reached = range;
    if (!seen && reached > 0.0) return reached;
  }
  return std::min(far_m, reached);
}

}  // namespace rondel::range
