#include "calib/range/least_squares.h"

#include <ceres/ceres.h>

#include <Eigen/QR>
#include <cmath>

namespace rondel::range {
namespace {

class TermCost final : public ceres::CostFunction {
 public:
  TermCost(const Term& term, const Eigen::VectorXd& scale) : term_(term), scale_(scale) {
    set_num_residuals(term.residuals);
    mutable_parameter_block_sizes()->push_back(static_cast<int>(scale.size()));
    if (term.latent > 0) mutable_parameter_block_sizes()->push_back(term.latent);
  }

  bool Evaluate(double const* const* parameters,
                double* residuals,
                double** jacobians) const override {
    const auto n = scale_.size();
    const Eigen::VectorXd shared =
        Eigen::Map<const Eigen::VectorXd>(parameters[0], n).cwiseProduct(scale_);
    Eigen::VectorXd latent(term_.latent);
    if (term_.latent > 0) latent = Eigen::Map<const Eigen::VectorXd>(parameters[1], term_.latent);
    const bool want_shared = jacobians != nullptr && jacobians[0] != nullptr;
    const bool want_latent = jacobians != nullptr && term_.latent > 0 && jacobians[1] != nullptr;
    Eigen::VectorXd r(term_.residuals);
    Eigen::MatrixXd by_shared(term_.residuals, n);
    Eigen::MatrixXd by_latent(term_.residuals, term_.latent);
    if (!term_.evaluate(shared,
                        latent,
                        r,
                        want_shared ? &by_shared : nullptr,
                        want_latent ? &by_latent : nullptr)) {
      return false;
    }
    using RowMajor = Eigen::Matrix<double, Eigen::Dynamic, Eigen::Dynamic, Eigen::RowMajor>;
    Eigen::Map<Eigen::VectorXd>(residuals, r.size()) = r;
    if (want_shared) {
      Eigen::Map<RowMajor>(jacobians[0], r.size(), n) = by_shared * scale_.asDiagonal();
    }
    if (want_latent) {
      // Row-major with one column is a column in either order.
      for (Eigen::Index i = 0; i < r.size(); ++i) {
        for (int j = 0; j < term_.latent; ++j) jacobians[1][i * term_.latent + j] = by_latent(i, j);
      }
    }
    return true;
  }

 private:
  const Term& term_;
  const Eigen::VectorXd& scale_;
};

/// Whether every term can be evaluated at the start; the solver complains loudly where not.
bool can_start(const LeastSquaresProblem& problem, const LeastSquaresSolution& solution) {
  for (std::size_t i = 0; i < problem.terms.size(); ++i) {
    const Term& term = problem.terms[i];
    Eigen::VectorXd r(term.residuals);
    Eigen::MatrixXd by_shared(term.residuals, problem.start.size());
    Eigen::MatrixXd by_latent(term.residuals, term.latent);
    if (!term.evaluate(problem.start, solution.latent[i], r, &by_shared, &by_latent) ||
        !r.allFinite() || !by_shared.allFinite() || !by_latent.allFinite()) {
      return false;
    }
  }
  return true;
}

}  // namespace

LeastSquaresSolution solve(const LeastSquaresProblem& problem) {
  const Eigen::VectorXd scale =
      problem.scale.size() > 0 ? problem.scale : Eigen::VectorXd::Ones(problem.start.size());
  Eigen::VectorXd shared = problem.start.cwiseQuotient(scale);
  LeastSquaresSolution solution;
  for (const Term& term : problem.terms) {
    solution.latent.push_back(term.latent_start.size() == term.latent
                                  ? term.latent_start
                                  : Eigen::VectorXd::Zero(term.latent));
  }

  solution.shared = problem.start;
  if (!can_start(problem, solution)) return solution;

  ceres::Problem::Options ownership;
  ownership.loss_function_ownership = ceres::DO_NOT_TAKE_OWNERSHIP;
  ceres::Problem ceres_problem(ownership);
  ceres::CauchyLoss cauchy(problem.cauchy > 0.0 ? problem.cauchy : 1.0);
  ceres::Solver::Options options;
  bool any_latent = false;
  for (std::size_t i = 0; i < problem.terms.size(); ++i) {
    const Term& term = problem.terms[i];
    ceres::LossFunction* loss = term.robust && problem.cauchy > 0.0 ? &cauchy : nullptr;
    auto* cost = new TermCost(term, scale);  // owned by ceres_problem
    if (term.latent > 0) {
      ceres_problem.AddResidualBlock(cost, loss, shared.data(), solution.latent[i].data());
      any_latent = true;
    } else {
      ceres_problem.AddResidualBlock(cost, loss, shared.data());
    }
  }
  if (any_latent) {
    options.linear_solver_ordering = std::make_shared<ceres::ParameterBlockOrdering>();
    for (Eigen::VectorXd& latent : solution.latent) {
      if (latent.size() > 0) options.linear_solver_ordering->AddElementToGroup(latent.data(), 0);
    }
    options.linear_solver_ordering->AddElementToGroup(shared.data(), 1);
  }
  options.linear_solver_type = any_latent ? ceres::DENSE_SCHUR : ceres::DENSE_QR;
  options.max_num_iterations = problem.most_iterations;
  options.function_tolerance = problem.tolerance;
  options.gradient_tolerance = 1e-20;
  options.parameter_tolerance = problem.tolerance < 1e-12 ? 1e-15 : 1e-10;
  options.num_threads = 1;
  options.logging_type = ceres::SILENT;
  ceres::Solver::Summary summary;
  ceres::Solve(options, &ceres_problem, &summary);
  solution.shared = shared.cwiseProduct(scale);
  solution.usable = summary.IsSolutionUsable() && std::isfinite(summary.final_cost);
  solution.sum_of_squares = 2.0 * summary.final_cost;
  solution.iterations = static_cast<int>(summary.iterations.size());
  return solution;
}

Inference infer(const LeastSquaresProblem& problem, const Eigen::VectorXd& solution) {
  const auto n = solution.size();
  Eigen::Index total = 0;
  for (const Term& term : problem.terms) total += term.residuals;
  Eigen::MatrixXd jacobian(total, n);
  Inference result;
  result.residual.resize(total);
  Eigen::Index at = 0;
  for (const Term& term : problem.terms) {
    Eigen::VectorXd r(term.residuals);
    Eigen::MatrixXd j(term.residuals, n);
    term.evaluate(solution, Eigen::VectorXd(), r, &j, nullptr);
    jacobian.middleRows(at, term.residuals) = j;
    result.residual.segment(at, term.residuals) = r;
    at += term.residuals;
  }
  // Columns brought to one size first, so that the rank is that of the problem, not of its units.
  const Eigen::VectorXd size = jacobian.colwise().norm().transpose();
  const Eigen::MatrixXd scaled = jacobian * size.cwiseInverse().asDiagonal();
  const Eigen::HouseholderQR<Eigen::MatrixXd> qr(scaled);
  const Eigen::MatrixXd q = qr.householderQ() * Eigen::MatrixXd::Identity(total, n);
  const Eigen::MatrixXd r = qr.matrixQR().topRows(n).triangularView<Eigen::Upper>();
  const Eigen::MatrixXd inverse =
      r.triangularView<Eigen::Upper>().solve(Eigen::MatrixXd::Identity(n, n));
  result.leverage = q.rowwise().squaredNorm();
  result.degrees_of_freedom = static_cast<int>(total - n);
  const double squares = result.residual.squaredNorm();
  const double variance = result.degrees_of_freedom > 0 ? squares / result.degrees_of_freedom : 0.0;
  result.residual_sd = std::sqrt(variance);
  const Eigen::MatrixXd unscale = size.cwiseInverse().asDiagonal() * inverse;
  result.covariance = variance * unscale * unscale.transpose();
  for (Eigen::Index i = 0; i < total; ++i) {
    result.press += std::pow(result.residual[i] / (1.0 - result.leverage[i]), 2);
  }
  return result;
}

}  // namespace rondel::range
