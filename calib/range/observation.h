#pragma once

#include <memory>
#include <optional>

#include "calib/range/fit.h"
#include "calib/range/least_squares.h"
#include "calib/range/model.h"

namespace rondel::range {

/// An observation around given parameters: observed = predicted + by_params d(params) + noise.
struct Linear {
  Eigen::VectorXd residual;    ///< observed minus predicted, px
  Eigen::MatrixXd by_params;   ///< of the prediction
  Eigen::MatrixXd covariance;  ///< of the noise; what is latent is in it
};

/// A kind of observation: how it enters the fit, and what it says once fitted. A further kind is
/// one more file and its make function here.
class Observation {
 public:
  Observation() = default;
  Observation(const Observation&) = delete;
  Observation& operator=(const Observation&) = delete;
  virtual ~Observation() = default;

  /// Whitened residuals; latent numbers are in units of their own noise, starting at 0.
  [[nodiscard]] virtual Term term(const Model& model, const Params& start) const = 0;
  /// No answer where the model does not predict it.
  [[nodiscard]] virtual std::optional<Linear> linear(const Model& model, const Params& p) const = 0;
};

/// A pixel and a taped place. `noise_scale` multiplies pixel and tape noise.
[[nodiscard]] std::unique_ptr<Observation> observe_mark(const MarkInput& mark, double noise_scale);
[[nodiscard]] std::unique_ptr<Observation> observe_rim_centre(const ObservedPoint& centre);
[[nodiscard]] std::unique_ptr<Observation> observe_reflection(const ObservedPoint& centre);

}  // namespace rondel::range
