#include "calib/range/design.h"

#include <Eigen/Cholesky>
#include <algorithm>
#include <cassert>
#include <cmath>
#include <cstddef>

namespace rondel::range {
namespace {

/// What is made small. Between the two goals stand powers of the variance: a largest value alone is
/// a landscape of plateaus in which exchanging one observation at a time gets stuck; the powers
/// lead up to it. `determinant` is the D-criterion, for a start.
enum class Measure { mean, power4, power16, power64, worst, determinant };

Measure measure_of(Goal goal) { return goal == Goal::worst ? Measure::worst : Measure::mean; }

/// Everything the goal needs to know about the present state.
struct State {
  Eigen::MatrixXd covariance;          ///< p x p
  Eigen::MatrixXd targets_covariance;  ///< targets * covariance, n x p
  Eigen::VectorXd variance;            ///< of each target
  double log_determinant = 0.0;        ///< of the information
};

const Eigen::MatrixXd& rows_of(const DesignProblem& problem, int index) {
  return problem.candidates[static_cast<std::size_t>(index)];
}

State state_of(const DesignProblem& problem, const Eigen::MatrixXd& information) {
  State state;
  const Eigen::LDLT<Eigen::MatrixXd> solver(information);
  state.log_determinant = solver.vectorD().array().log().sum();
  state.covariance =
      solver.solve(Eigen::MatrixXd::Identity(information.rows(), information.cols()));
  state.targets_covariance = problem.targets * state.covariance;
  state.variance = state.targets_covariance.cwiseProduct(problem.targets).rowwise().sum();
  return state;
}

Eigen::MatrixXd information_with(const DesignProblem& problem, const std::vector<int>& chosen) {
  Eigen::MatrixXd information = problem.information;
  for (const int index : chosen) {
    const Eigen::MatrixXd& rows = rows_of(problem, index);
    information.noalias() += rows.transpose() * rows;
  }
  return information;
}

/// (mean of variance^q)^(1 / 2q) with q = 2^doublings, scaled so that nothing overflows.
double power_mean(const Eigen::VectorXd& variance, int doublings) {
  const double largest = variance.maxCoeff();
  if (!(largest > 0.0)) return 0.0;
  Eigen::ArrayXd power = (variance.array() / largest).max(0.0);
  for (int i = 0; i < doublings; ++i) power = power.square();
  return std::sqrt(largest * std::pow(power.mean(), std::ldexp(1.0, -doublings)));
}

/// Doublings of the power that the measure takes; the worst case has no power of its own.
int doublings_of(Measure measure) {
  if (measure == Measure::power4) return 2;
  return measure == Measure::power16 ? 4 : 6;
}

double value_of(const Eigen::VectorXd& variance, Measure measure) {
  if (measure == Measure::mean) return std::sqrt(std::max(0.0, variance.mean()));
  if (measure == Measure::worst) return std::sqrt(std::max(0.0, variance.maxCoeff()));
  return power_mean(variance, doublings_of(measure));
}

double determinant_value(double log_determinant, Eigen::Index parameters) {
  return std::exp(-0.5 * log_determinant / static_cast<double>(parameters));
}

double value_now(const State& state, Measure measure) {
  if (measure == Measure::determinant) {
    return determinant_value(state.log_determinant, state.covariance.rows());
  }
  return value_of(state.variance, measure);
}

/// The measure once `rows` are observed too: the covariance loses C A^T (I + A C A^T)^-1 A C.
double value_with(const State& state, const Eigen::MatrixXd& rows, Measure measure) {
  const Eigen::MatrixXd inner = Eigen::MatrixXd::Identity(rows.rows(), rows.rows()) +
                                rows * state.covariance * rows.transpose();
  const Eigen::LLT<Eigen::MatrixXd> root(inner);
  const Eigen::MatrixXd lower = root.matrixL();
  if (measure == Measure::determinant) {
    const double gain = 2.0 * lower.diagonal().array().log().sum();
    return determinant_value(state.log_determinant + gain, state.covariance.rows());
  }
  const Eigen::MatrixXd across = rows * state.targets_covariance.transpose();  // k x n
  const Eigen::MatrixXd reduced = lower.triangularView<Eigen::Lower>().solve(across);
  return value_of(state.variance - reduced.colwise().squaredNorm().transpose(), measure);
}

int best_next(const DesignProblem& problem, const State& state, Measure measure) {
  int best = 0;
  double best_value = value_with(state, rows_of(problem, 0), measure);
  for (int i = 1; i < static_cast<int>(problem.candidates.size()); ++i) {
    const double value = value_with(state, rows_of(problem, i), measure);
    // The relative margin keeps ties from being decided by rounding.
    if (value < best_value * (1.0 - 1e-9)) {
      best_value = value;
      best = i;
    }
  }
  return best;
}

std::vector<int> greedy(const DesignProblem& problem, int count, Measure measure) {
  assert(!problem.candidates.empty());
  std::vector<int> chosen;
  Eigen::MatrixXd information = problem.information;
  for (int i = 0; i < count; ++i) {
    const int next = best_next(problem, state_of(problem, information), measure);
    chosen.push_back(next);
    const Eigen::MatrixXd& rows = rows_of(problem, next);
    information.noalias() += rows.transpose() * rows;
  }
  return chosen;
}

std::vector<int> exchange_for(const DesignProblem& problem,
                              std::vector<int> chosen,
                              Measure measure) {
  constexpr int kMostPasses = 30;
  constexpr double kWorthIt = 1e-6;  // relative
  double value = value_now(state_of(problem, information_with(problem, chosen)), measure);
  for (int pass = 0; pass < kMostPasses; ++pass) {
    bool improved = false;
    for (std::size_t i = 0; i < chosen.size(); ++i) {
      std::vector<int> others = chosen;
      others.erase(others.begin() + static_cast<std::ptrdiff_t>(i));
      const State state = state_of(problem, information_with(problem, others));
      const int candidate = best_next(problem, state, measure);
      const double with = value_with(state, rows_of(problem, candidate), measure);
      if (with < value * (1.0 - kWorthIt)) {
        chosen[i] = candidate;
        value = with;
        improved = true;
      }
    }
    if (!improved) break;
  }
  return chosen;
}

}  // namespace

double spread_after(const DesignProblem& problem, const std::vector<int>& chosen, Goal goal) {
  return value_now(state_of(problem, information_with(problem, chosen)), measure_of(goal));
}

std::vector<double> spread_with_each(const DesignProblem& problem,
                                     const std::vector<int>& chosen,
                                     Goal goal) {
  const State state = state_of(problem, information_with(problem, chosen));
  std::vector<double> spreads;
  spreads.reserve(problem.candidates.size());
  for (const Eigen::MatrixXd& rows : problem.candidates) {
    spreads.push_back(value_with(state, rows, measure_of(goal)));
  }
  return spreads;
}

std::vector<int> choose_greedily(const DesignProblem& problem, int count, Goal goal) {
  return greedy(problem, count, measure_of(goal));
}

std::vector<int> exchange(const DesignProblem& problem, std::vector<int> chosen, Goal goal) {
  if (chosen.empty()) return chosen;
  std::vector<int> best = chosen;
  double best_value = spread_after(problem, best, goal);
  const auto keep_better = [&](const std::vector<int>& other) {
    const double value = spread_after(problem, other, goal);
    if (value < best_value) {
      best_value = value;
      best = other;
    }
  };
  if (goal == Goal::worst) {
    for (const Measure step :
         {Measure::mean, Measure::power4, Measure::power16, Measure::power64}) {
      chosen = exchange_for(problem, std::move(chosen), step);
      keep_better(chosen);
    }
  }
  keep_better(exchange_for(problem, best, measure_of(goal)));
  return best;
}

std::vector<int> choose_design(const DesignProblem& problem, int count, Goal goal) {
  if (count <= 0) return {};
  std::vector<int> best;
  double best_value = 0.0;
  for (const Measure start : {measure_of(goal), Measure::determinant}) {
    std::vector<int> chosen = exchange_for(problem, greedy(problem, count, start), start);
    if (goal == Goal::worst) {
      // Straight to the goal as well as through the powers: where the determinant's optimum is the
      // goal's (Kiefer and Wolfowitz), the powers only lead away.
      const std::vector<int> direct = exchange_for(problem, chosen, Measure::worst);
      const double value = spread_after(problem, direct, goal);
      if (best.empty() || value < best_value) {
        best_value = value;
        best = direct;
      }
    }
    chosen = exchange(problem, std::move(chosen), goal);
    const double value = spread_after(problem, chosen, goal);
    if (best.empty() || value < best_value) {
      best_value = value;
      best = std::move(chosen);
    }
  }
  return best;
}

}  // namespace rondel::range
