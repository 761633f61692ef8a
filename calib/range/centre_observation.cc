#include <Eigen/Cholesky>

#include "calib/range/observation.h"

namespace rondel::range {
namespace {

/// A centre seen in the image, of the rim or of the camera's own reflection.
class CentreObservation final : public Observation {
 public:
  using Predict = std::optional<RimCentre> (Model::*)(const Params&) const;
  CentreObservation(const ObservedPoint& seen, Predict predict) : seen_(seen), predict_(predict) {}

  [[nodiscard]] std::optional<Linear> linear(const Model& model, const Params& p) const override {
    const auto predicted = (model.*predict_)(p);
    if (!predicted) return std::nullopt;
    Linear linear;
    linear.residual.resize(2);
    linear.residual << seen_.at.u_px - predicted->at.u_px, seen_.at.v_px - predicted->at.v_px;
    linear.by_params = predicted->by_params;
    const double slack = predicted->slack_px * predicted->slack_px;
    linear.covariance.resize(2, 2);
    linear.covariance << seen_.cov_px2[0] + slack, seen_.cov_px2[1], seen_.cov_px2[1],
        seen_.cov_px2[2] + slack;
    return linear;
  }

  [[nodiscard]] Term term(const Model& model, const Params& /*start*/) const override {
    Term term;
    term.residuals = 2;
    term.evaluate = [this, &model](const Eigen::VectorXd& shared,
                                   const Eigen::VectorXd& /*latent*/,
                                   Eigen::VectorXd& residual,
                                   Eigen::MatrixXd* by_shared,
                                   Eigen::MatrixXd* /*by_latent*/) {
      const auto at = linear(model, shared);
      if (!at) return false;
      const Eigen::LLT<Eigen::MatrixXd> root(at->covariance);
      residual = root.matrixL().solve(-at->residual);
      if (by_shared != nullptr) *by_shared = root.matrixL().solve(at->by_params);
      return true;
    };
    return term;
  }

 private:
  ObservedPoint seen_;
  Predict predict_;
};

}  // namespace

std::unique_ptr<Observation> observe_rim_centre(const ObservedPoint& centre) {
  return std::make_unique<CentreObservation>(centre, &Model::rim_centre);
}
std::unique_ptr<Observation> observe_reflection(const ObservedPoint& centre) {
  return std::make_unique<CentreObservation>(centre, &Model::reflection);
}

}  // namespace rondel::range
