#include "calib/range/design.h"

#include <gtest/gtest.h>

#include <Eigen/Dense>
#include <algorithm>
#include <cmath>

namespace rondel::range {
namespace {

// Polynomials of degree d on [-1, 1] with equal noise: the optimal designs are known (Kiefer and
// Wolfowitz 1960: D-optimal = G-optimal, largest standardised variance = number of parameters).

Eigen::RowVectorXd powers(double x, int degree) {
  Eigen::RowVectorXd row(degree + 1);
  row[0] = 1.0;
  for (int k = 1; k <= degree; ++k) row[k] = row[k - 1] * x;
  return row;
}

/// Candidates every 1/100; the known optimal points themselves are not among them by design:
/// 0.4472 and 0.6547 fall between two candidates.
constexpr int kSteps = 200;

DesignProblem polynomial(int degree) {
  DesignProblem problem;
  // As good as nothing known before: 1e-9 of one observation.
  problem.information = 1e-9 * Eigen::MatrixXd::Identity(degree + 1, degree + 1);
  problem.targets.resize(kSteps + 1, degree + 1);
  for (int i = 0; i <= kSteps; ++i) {
    const double x = -1.0 + 2.0 * i / kSteps;
    problem.candidates.emplace_back(powers(x, degree));
    problem.targets.row(i) = powers(x, degree);
  }
  return problem;
}

double point_of(int index) { return -1.0 + 2.0 * index / kSteps; }

/// Number of parameters over the largest standardised variance.
double g_efficiency(const DesignProblem& problem, const std::vector<int>& chosen) {
  const double worst = spread_after(problem, chosen, Goal::worst);
  const double parameters = static_cast<double>(problem.information.rows());
  return parameters / (static_cast<double>(chosen.size()) * worst * worst);
}

double d_value(const DesignProblem& problem, const std::vector<int>& chosen) {
  Eigen::MatrixXd m = Eigen::MatrixXd::Zero(problem.information.rows(), problem.information.rows());
  for (const int i : chosen) {
    const auto& rows = problem.candidates[static_cast<std::size_t>(i)];
    m += rows.transpose() * rows / static_cast<double>(chosen.size());
  }
  return m.determinant();
}

TEST(Design, TwelveEquispacedPointsOnACubicHaveTheirKnownEfficiency) {
  // G 0.440, D 0.756: computed from the definition; printed to three digits.
  DesignProblem problem = polynomial(3);
  problem.candidates.clear();
  std::vector<int> chosen;
  for (int i = 0; i < 12; ++i) {
    problem.candidates.emplace_back(powers(-1.0 + 2.0 * i / 11.0, 3));
    chosen.push_back(i);
  }
  EXPECT_NEAR(g_efficiency(problem, chosen), 0.440, 5e-4);
  DesignProblem best = polynomial(3);
  best.candidates.clear();
  for (const double x : {-1.0, -std::sqrt(0.2), std::sqrt(0.2), 1.0}) {
    best.candidates.emplace_back(powers(x, 3));
  }
  const double ratio = d_value(problem, chosen) / d_value(best, {0, 1, 2, 3});
  EXPECT_NEAR(std::pow(ratio, 0.25), 0.756, 5e-4);
}

TEST(Design, FindsTheKnownOptimalPoints) {
  const std::vector<std::vector<double>> known = {{-1.0, 0.0, 1.0},
                                                  {-1.0, -0.4472136, 0.4472136, 1.0},
                                                  {-1.0, -0.6546537, 0.0, 0.6546537, 1.0}};
  for (int degree = 2; degree <= 4; ++degree) {
    const DesignProblem problem = polynomial(degree);
    const auto& points = known[static_cast<std::size_t>(degree - 2)];
    for (const int repeats : {1, 3}) {
      std::vector<int> chosen = choose_design(problem, repeats * (degree + 1), Goal::worst);
      std::sort(chosen.begin(), chosen.end());
      // The grid's nearest points are at most 0.005 from the known ones; a variance is flat there
      // (its derivative is zero at an inner support point), so 1 - efficiency is of the order of
      // degree^4 x 0.005^2 = 0.6 % at most.
      EXPECT_GT(g_efficiency(problem, chosen), 0.994) << "degree " << degree << " x " << repeats;
      EXPECT_LE(g_efficiency(problem, chosen), 1.0 + 1e-6);
      for (std::size_t i = 0; i < chosen.size(); ++i) {
        const double want = points[i / static_cast<std::size_t>(repeats)];
        EXPECT_NEAR(point_of(chosen[i]), want, 0.02) << "degree " << degree << " point " << i;
      }
    }
  }
}

TEST(Design, ExchangeNeverHurtsAndEndsNearTheBestFromABadStart) {
  const DesignProblem problem = polynomial(3);
  std::vector<int> bad;
  for (int i = 0; i < 8; ++i) bad.push_back(90 + 2 * i);
  for (const Goal goal : {Goal::worst, Goal::mean}) {
    const double before = spread_after(problem, bad, goal);
    const std::vector<int> better = exchange(problem, bad, goal);
    EXPECT_LT(spread_after(problem, better, goal), 0.2 * before);
  }
  EXPECT_GT(g_efficiency(problem, exchange(problem, bad, Goal::worst)), 0.9);
}

TEST(Design, AddingAnObservationAgreesWithRefactoring) {
  const DesignProblem problem = polynomial(2);
  const std::vector<int> chosen = {0, 65, 135, 200};
  for (const Goal goal : {Goal::worst, Goal::mean}) {
    const std::vector<double> each = spread_with_each(problem, chosen, goal);
    for (const int next : {0, 29, 100, 199}) {
      std::vector<int> with = chosen;
      with.push_back(next);
      EXPECT_NEAR(each[static_cast<std::size_t>(next)], spread_after(problem, with, goal), 1e-9);
    }
  }
}

TEST(Design, WhatIsKnownAlreadyIsNotAskedAgain) {
  // A strong prior on the constant and the slope leaves only the curvature to learn: the ends and
  // the middle carry it, and of a straight line's two ends nothing more is asked.
  DesignProblem problem = polynomial(1);
  problem.information(1, 1) = 1e6;
  const std::vector<int> chosen = choose_greedily(problem, 4, Goal::worst);
  const double left = spread_after(problem, chosen, Goal::worst);
  EXPECT_NEAR(left, 0.5, 0.01) << "four marks, one unknown: 1 / sqrt(4)";
}

}  // namespace
}  // namespace rondel::range
