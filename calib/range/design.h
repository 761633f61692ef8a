#pragma once

#include <Eigen/Core>
#include <vector>

namespace rondel::range {

/// What a set of further observations should make small.
enum class Goal {
  worst,  ///< the largest spread over the targets: G-optimal (Kiefer and Wolfowitz 1960)
  mean    ///< the root mean square spread over the targets: I-optimal
};

/// Where to observe next, in the language of linear models: p parameters, of which `information`
/// (inverse covariance, p x p, positive definite) is known before; each candidate would add the
/// information rows^T rows, rows (k x p) whitened by its noise; targets (n x p) are the gradients
/// of the quantities whose spread counts.
struct DesignProblem {
  Eigen::MatrixXd information;
  std::vector<Eigen::MatrixXd> candidates;
  Eigen::MatrixXd targets;
};

/// The goal's value when the candidates `chosen` (indices, repetition allowed) have been observed:
/// a standard deviation in the targets' unit.
[[nodiscard]] double spread_after(const DesignProblem& problem,
                                  const std::vector<int>& chosen,
                                  Goal goal);

/// The goal's value for every candidate added once to `chosen`.
[[nodiscard]] std::vector<double> spread_with_each(const DesignProblem& problem,
                                                   const std::vector<int>& chosen,
                                                   Goal goal);

/// `count` candidates one after the other, each the best next one. Ties go to the lower index.
[[nodiscard]] std::vector<int> choose_greedily(const DesignProblem& problem, int count, Goal goal);

/// Improves a choice by exchanging one of it at a time for the best other candidate until nothing
/// helps any more (Fedorov 1972), for the worst case by way of growing powers of the variance.
/// Never worse than what it was given.
[[nodiscard]] std::vector<int> exchange(const DesignProblem& problem,
                                        std::vector<int> chosen,
                                        Goal goal);

/// Greedy for the goal and for the determinant of the information (D-optimal, which is where
/// G-optimal designs are when nothing is known before), each exchanged; the better of the two.
[[nodiscard]] std::vector<int> choose_design(const DesignProblem& problem, int count, Goal goal);

}  // namespace rondel::range
