#include <cmath>

#include "calib/range/observation.h"

namespace rondel::range {
namespace {

/// The mark's true place is latent: how much farther than taped, and how much further round, in
/// units of the tape's standard deviation. Where no bearing was measured the second is only held by
/// the picture, in units of kFreeTurn_rad.
class MarkObservation final : public Observation {
 public:
  static constexpr double kFreeTurn_rad = 0.1;
  static constexpr double kUnknownTurn_rad = 30.0;  // as good as nothing known

  MarkObservation(const MarkInput& mark, double noise_scale)
      : mark_(mark),
        pixel_sd_(mark.pixel_sd_px * noise_scale),
        range_sd_(mark.tape_sd_m * noise_scale),
        turn_sd_(mark.bearing_rad ? range_sd_ / std::max(mark.range_m, range_sd_) : kFreeTurn_rad) {
  }

  [[nodiscard]] Term term(const Model& model, const Params& start) const override {
    const std::optional<double> bearing = bearing_at(model, start);
    Term term;
    term.latent = 2;
    term.residuals = mark_.bearing_rad ? 4 : 3;
    term.robust = true;
    term.latent_start = Eigen::VectorXd::Zero(2);
    term.evaluate = [this, &model, b0 = bearing.value_or(0.0)](const Eigen::VectorXd& shared,
                                                               const Eigen::VectorXd& latent,
                                                               Eigen::VectorXd& residual,
                                                               Eigen::MatrixXd* by_shared,
                                                               Eigen::MatrixXd* by_latent) {
      const double range = mark_.range_m + range_sd_ * latent[0];
      const double b = b0 + turn_sd_ * latent[1];
      const FloorPoint place = to_point({range, b});
      const auto fill = [&](ImagePoint at) {
        residual[0] = (at.u_px - mark_.pixel.u_px) / pixel_sd_;
        residual[1] = (at.v_px - mark_.pixel.v_px) / pixel_sd_;
        residual[2] = latent[0];
        if (mark_.bearing_rad) residual[3] = latent[1];
      };
      if (by_shared == nullptr && by_latent == nullptr) {
        const auto at = model.pixel(shared, place, mark_.height_m);
        if (at) fill(*at);
        return at.has_value();
      }
      const auto seen = model.project(shared, place, mark_.height_m);
      if (!seen) return false;
      fill(seen->at);
      if (by_shared != nullptr) {
        by_shared->setZero();
        by_shared->topRows(2) = seen->by_params / pixel_sd_;
      }
      if (by_latent != nullptr) {
        by_latent->setZero();
        by_latent->topRows(2) = seen->by_place * turn(range, b) / pixel_sd_;
        (*by_latent)(2, 0) = 1.0;
        if (mark_.bearing_rad) (*by_latent)(3, 1) = 1.0;
      }
      return true;
    };
    return term;
  }

  [[nodiscard]] std::optional<Linear> linear(const Model& model, const Params& p) const override {
    const std::optional<double> bearing = bearing_at(model, p);
    if (!bearing) return std::nullopt;
    const auto seen = model.project(p, to_point({mark_.range_m, *bearing}), mark_.height_m);
    if (!seen) return std::nullopt;
    Linear linear;
    linear.residual.resize(2);
    linear.residual << mark_.pixel.u_px - seen->at.u_px, mark_.pixel.v_px - seen->at.v_px;
    linear.by_params = seen->by_params;
    Eigen::Matrix2d spread = seen->by_place * turn(mark_.range_m, *bearing);
    if (!mark_.bearing_rad) spread.col(1) *= kUnknownTurn_rad / kFreeTurn_rad;
    linear.covariance =
        pixel_sd_ * pixel_sd_ * Eigen::Matrix2d::Identity() + spread * spread.transpose();
    return linear;
  }

 private:
  /// Taped, or where the picture has it.
  [[nodiscard]] std::optional<double> bearing_at(const Model& model, const Params& p) const {
    if (mark_.bearing_rad) return mark_.bearing_rad;
    const auto place = model.place(p, mark_.pixel, mark_.height_m);
    if (!place) return std::nullopt;
    return to_spot(*place).bearing_rad;
  }
  /// d(x, y) by the latent numbers.
  [[nodiscard]] Eigen::Matrix2d turn(double range, double b) const {
    Eigen::Matrix2d d;
    d << std::cos(b) * range_sd_, -std::sin(b) * range * turn_sd_, std::sin(b) * range_sd_,
        std::cos(b) * range * turn_sd_;
    return d;
  }

  MarkInput mark_;
  double pixel_sd_;
  double range_sd_;
  double turn_sd_;
};

}  // namespace

std::unique_ptr<Observation> observe_mark(const MarkInput& mark, double noise_scale) {
  return std::make_unique<MarkObservation>(mark, noise_scale);
}

}  // namespace rondel::range
