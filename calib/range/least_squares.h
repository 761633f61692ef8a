#pragma once

#include <Eigen/Core>
#include <functional>
#include <string>
#include <vector>

namespace rondel::range {

/// A group of residuals that belong together: whitened, depending on the shared parameters and,
/// where `latent` > 0, on that many numbers of its own.
struct Term {
  int residuals = 1;
  int latent = 0;
  Eigen::VectorXd latent_start;
  /// Fills the residuals, and the Jacobians where they are not null: residuals x parameters and
  /// residuals x latent, in natural units. False where the residuals cannot be evaluated.
  std::function<bool(const Eigen::VectorXd& shared,
                     const Eigen::VectorXd& latent,
                     Eigen::VectorXd& residual,
                     Eigen::MatrixXd* by_shared,
                     Eigen::MatrixXd* by_latent)>
      evaluate;
  bool robust = false;  ///< under the problem's loss
};

struct LeastSquaresProblem {
  Eigen::VectorXd start;
  Eigen::VectorXd scale;  ///< natural step of each parameter; empty: 1
  std::vector<Term> terms;
  double cauchy = 0.0;  ///< scale of the Cauchy loss on robust terms; 0: plain squares
  int most_iterations = 100;
  double tolerance = 1e-20;  ///< relative change of the sum of squares at which it is enough
};

struct LeastSquaresSolution {
  Eigen::VectorXd shared;
  std::vector<Eigen::VectorXd> latent;
  double sum_of_squares = 0.0;  ///< of all residuals, the loss applied
  bool usable = false;
  int iterations = 0;
};

/// Minimises the sum of squares with Ceres (Levenberg-Marquardt); latent numbers are eliminated
/// first (Schur complement).
[[nodiscard]] LeastSquaresSolution solve(const LeastSquaresProblem& problem);

/// What a solved problem without latent numbers says about its parameters.
struct Inference {
  Eigen::MatrixXd covariance;  ///< times the residual variance
  Eigen::VectorXd leverage;    ///< of each residual: the hat matrix' diagonal
  Eigen::VectorXd residual;
  double residual_sd = 0.0;
  int degrees_of_freedom = 0;
  /// Predicted residual sum of squares, leaving each residual out in turn: e / (1 - h), exact for
  /// linear problems.
  double press = 0.0;
};
[[nodiscard]] Inference infer(const LeastSquaresProblem& problem, const Eigen::VectorXd& solution);

}  // namespace rondel::range
