// The fitting wrapper against the world: NIST's reference data sets with certified digits, and the
// Guide to the Expression of Uncertainty in Measurement (JCGM 100:2008), example H.3.
#include "calib/range/least_squares.h"

#include <gtest/gtest.h>

#include <cmath>
#include <functional>

#include "tests/outside/nist_data.h"

namespace rondel::range {
namespace {

using outside::NistSet;
/// y(x; b) with derivatives by b.
using Curve = std::function<double(const Eigen::VectorXd& b, double x, Eigen::RowVectorXd& by)>;

LeastSquaresProblem problem_of(const NistSet& set,
                               const std::vector<double>& start,
                               const Curve& curve) {
  LeastSquaresProblem problem;
  problem.start =
      Eigen::Map<const Eigen::VectorXd>(start.data(), static_cast<Eigen::Index>(start.size()));
  problem.most_iterations = 5000;
  for (std::size_t i = 0; i < set.x.size(); ++i) {
    Term term;
    term.evaluate = [x = set.x[i], y = set.y[i], &curve](const Eigen::VectorXd& b,
                                                         const Eigen::VectorXd&,
                                                         Eigen::VectorXd& residual,
                                                         Eigen::MatrixXd* by_shared,
                                                         Eigen::MatrixXd*) {
      Eigen::RowVectorXd by(b.size());
      residual[0] = curve(b, x, by) - y;
      if (by_shared != nullptr) *by_shared = by;
      return std::isfinite(residual[0]) && by.allFinite();
    };
    problem.terms.push_back(std::move(term));
  }
  return problem;
}

/// Matching digits, at most 11 (the certified values carry no more).
double digits(double x, double certified) {
  const double error = std::abs(x - certified) / std::abs(certified);
  return error < 1e-11 ? 11.0 : -std::log10(error);
}

struct NonlinearSet {
  const NistSet& (*set)();
  Curve curve;
};

std::vector<NonlinearSet> nonlinear_sets() {
  return {
      {outside::danwood,
       [](const Eigen::VectorXd& b, double x, Eigen::RowVectorXd& by) {
         const double p = std::pow(x, b[1]);
         by << p, b[0] * p * std::log(x);
         return b[0] * p;
       }},
      {outside::misra1a,
       [](const Eigen::VectorXd& b, double x, Eigen::RowVectorXd& by) {
         const double e = std::exp(-b[1] * x);
         by << 1.0 - e, b[0] * x * e;
         return b[0] * (1.0 - e);
       }},
      {outside::chwirut2,
       [](const Eigen::VectorXd& b, double x, Eigen::RowVectorXd& by) {
         const double e = std::exp(-b[0] * x);
         const double d = b[1] + b[2] * x;
         by << -x * e / d, -e / (d * d), -e * x / (d * d);
         return e / d;
       }},
      {outside::thurber,
       [](const Eigen::VectorXd& b, double x, Eigen::RowVectorXd& by) {
         const double n = b[0] + x * (b[1] + x * (b[2] + x * b[3]));
         const double d = 1.0 + x * (b[4] + x * (b[5] + x * b[6]));
         const double k = -n / (d * d);
         by << 1.0 / d, x / d, x * x / d, x * x * x / d, k * x, k * x * x, k * x * x * x;
         return n / d;
       }},
      {outside::mgh09,
       [](const Eigen::VectorXd& b, double x, Eigen::RowVectorXd& by) {
         const double n = x * x + x * b[1];
         const double d = x * x + x * b[2] + b[3];
         by << n / d, b[0] * x / d, -b[0] * n * x / (d * d), -b[0] * n / (d * d);
         return b[0] * n / d;
       }},
      {outside::rat43,
       [](const Eigen::VectorXd& b, double x, Eigen::RowVectorXd& by) {
         const double e = std::exp(b[1] - b[2] * x);
         const double base = 1.0 + e;
         const double p = std::pow(base, -1.0 / b[3]);
         const double k = -b[0] / b[3] * p / base * e;
         by << p, k, -x * k, b[0] * p * std::log(base) / (b[3] * b[3]);
         return b[0] * p;
       }},
  };
}

TEST(LeastSquares, NistNonlinearSetsFromBothStarts) {
  double sum = 0.0;
  int runs = 0;
  for (const NonlinearSet& s : nonlinear_sets()) {
    const NistSet& set = s.set();
    for (const auto& start : {set.start_1, set.start_2}) {
      const LeastSquaresSolution solution = solve(problem_of(set, start, s.curve));
      ASSERT_TRUE(solution.usable) << set.name;
      double least = 11.0;
      for (std::size_t k = 0; k < set.certified.size(); ++k) {
        least = std::min(least,
                         digits(solution.shared[static_cast<Eigen::Index>(k)], set.certified[k]));
      }
      EXPECT_GE(least, 4.0) << set.name << " from "
                            << (start == set.start_1 ? "the first" : "the second") << " start";
      sum += least;
      ++runs;
      if (least < 4.0) continue;
      const Inference inference = infer(problem_of(set, start, s.curve), solution.shared);
      for (std::size_t k = 0; k < set.sd.size(); ++k) {
        const auto i = static_cast<Eigen::Index>(k);
        EXPECT_GE(digits(std::sqrt(inference.covariance(i, i)), set.sd[k]), 4.0) << set.name;
      }
      EXPECT_GE(digits(solution.sum_of_squares, set.residual_squares), 4.0) << set.name;
    }
  }
  EXPECT_GE(sum / runs, 6.8);
  RecordProperty("mean_digits", std::to_string(sum / runs));
}

TEST(LeastSquares, NistStraightLineAndQuadratic) {
  const Curve polynomial = [](const Eigen::VectorXd& b, double x, Eigen::RowVectorXd& by) {
    double power = 1.0;
    double sum = 0.0;
    for (Eigen::Index k = 0; k < b.size(); ++k) {
      by[k] = power;
      sum += b[k] * power;
      power *= x;
    }
    return sum;
  };
  for (const auto& make : {outside::norris, outside::pontius}) {
    const NistSet& set = make();
    LeastSquaresProblem problem = problem_of(set, set.start_1, polynomial);
    // Natural steps: Pontius' quadratic term is nine orders below the linear one.
    problem.scale = Eigen::VectorXd::Ones(problem.start.size());
    for (Eigen::Index k = 1; k < problem.scale.size(); ++k)
      problem.scale[k] = problem.scale[k - 1] / set.x.back();
    const LeastSquaresSolution solution = solve(problem);
    ASSERT_TRUE(solution.usable);
    const Inference inference = infer(problem, solution.shared);
    for (std::size_t k = 0; k < set.certified.size(); ++k) {
      const auto i = static_cast<Eigen::Index>(k);
      EXPECT_GE(digits(solution.shared[i], set.certified[k]), 8.0) << set.name << " b" << k;
      EXPECT_GE(digits(std::sqrt(inference.covariance(i, i)), set.sd[k]), 8.0)
          << set.name << " b" << k;
    }
  }
}

// Calibration of a thermometer; data and printed values from the Guide, further digits computed
// from its formulas in double precision.
TEST(LeastSquares, GuideExampleH3) {
  const NistSet set = {
      "H.3",
      {21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511},
      {-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160},
      {0.0, 0.0},
      {0.0, 0.0},
      {-0.171203790131, 0.00218269773989},
      {0.002877597835, 0.000667938773},
      0.0};
  const Curve line = [](const Eigen::VectorXd& b, double t, Eigen::RowVectorXd& by) {
    by << 1.0, t - 20.0;
    return b[0] + b[1] * (t - 20.0);
  };
  const LeastSquaresProblem problem = problem_of(set, set.start_1, line);
  const LeastSquaresSolution solution = solve(problem);
  const Inference inference = infer(problem, solution.shared);
  for (int k = 0; k < 2; ++k) {
    const auto i = static_cast<std::size_t>(k);
    EXPECT_NEAR(solution.shared[k], set.certified[i], 1e-10 * std::abs(set.certified[i]));
    EXPECT_NEAR(std::sqrt(inference.covariance(k, k)), set.sd[i], 1e-9 * set.sd[i] + 5e-13);
  }
  EXPECT_NEAR(inference.covariance(0, 1) /
                  std::sqrt(inference.covariance(0, 0) * inference.covariance(1, 1)),
              -0.930429603093,
              1e-10);
  Eigen::RowVectorXd at30(2);
  at30 << 1.0, 10.0;
  EXPECT_NEAR(at30.dot(solution.shared), -0.149376812732, 1e-10);
  EXPECT_NEAR(
      std::sqrt((at30 * inference.covariance * at30.transpose()).value()), 0.004138595753, 1e-10);
  EXPECT_EQ(inference.degrees_of_freedom, 9);
  EXPECT_NEAR(inference.press, 1.627485653799e-04, 1e-10 * 1.7e-4 + 1e-15);
  const double leverage[] = {.316567896315,
                             .236274418556,
                             .172580309846,
                             .127778558100,
                             .100079846571,
                             .090912350952,
                             .100193250001,
                             .126910330909,
                             .172372059851,
                             .237016719665,
                             .319314259233};
  for (int i = 0; i < 11; ++i) EXPECT_NEAR(inference.leverage[i], leverage[i], 1e-10);
}

}  // namespace
}  // namespace rondel::range
