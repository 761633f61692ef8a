#include "vision/rim/ellipse.h"

#include <ceres/ceres.h>

#include <Eigen/Dense>
#include <algorithm>
#include <array>
#include <cmath>

namespace rondel::vision {
namespace {

using Vec5 = Eigen::Matrix<double, 5, 1>;
using Mat5 = Eigen::Matrix<double, 5, 5>;

Eigen::Matrix2d shape_of(const Vec5& p) {
  Eigen::Matrix2d shape;
  shape << p[2], p[4], p[4], p[3];
  return shape;
}

class DistanceCost : public ceres::SizedCostFunction<1, 5> {
 public:
  explicit DistanceCost(ImagePoint at) : at_(at) {}
  bool Evaluate(double const* const* parameters,
                double* residuals,
                double** jacobians) const override {
    Ellipse ellipse;
    ellipse.p = Eigen::Map<const Vec5>(parameters[0]);
    if (shape_of(ellipse.p).determinant() <= 0.0) return false;
    Vec5 jacobian;
    residuals[0] = ellipse.distance_px(at_, &jacobian);
    if (jacobians != nullptr && jacobians[0] != nullptr) {
      Eigen::Map<Vec5>{jacobians[0]} = jacobian;
    }
    return true;
  }

 private:
  ImagePoint at_;
};

/// Roundness in the same units as the distances' cost: (difference / 2, uv) / sd * noise.
class RoundCost : public ceres::SizedCostFunction<2, 5> {
 public:
  explicit RoundCost(double weight) : weight_(weight) {}
  bool Evaluate(double const* const* parameters,
                double* residuals,
                double** jacobians) const override {
    const double* p = parameters[0];
    residuals[0] = 0.5 * weight_ * (p[2] - p[3]);
    residuals[1] = weight_ * p[4];
    if (jacobians != nullptr && jacobians[0] != nullptr) {
      std::fill_n(jacobians[0], 10, 0.0);
      jacobians[0][2] = 0.5 * weight_;
      jacobians[0][3] = -0.5 * weight_;
      jacobians[0][9] = weight_;
    }
    return true;
  }

 private:
  double weight_;
};

double median_abs(std::vector<double> values) {
  for (double& v : values) v = std::abs(v);
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

/// Deviation of a normal error with this median absolute value.
constexpr double kSdPerMedian = 1.4826;

std::vector<double> distances(std::span<const ImagePoint> points, const Ellipse& ellipse) {
  std::vector<double> out;
  out.reserve(points.size());
  for (const ImagePoint& at : points) out.push_back(ellipse.distance_px(at));
  return out;
}

/// Weighted information and Newey-West middle of the least squares.
Mat5 sandwich(std::span<const ImagePoint> points,
              const EllipseFit& fit,
              const Mat5& prior_information,
              int neighbours) {
  const std::size_t n = points.size();
  std::vector<Vec5> score(n);
  Mat5 information = prior_information;
  double weights = 0.0;
  for (std::size_t i = 0; i < n; ++i) {
    Vec5 j;
    const double r = fit.ellipse.distance_px(points[i], &j);
    // The slope of Cauchy's influence, which a weight of 1 / (1 + s^2) means: w (2 w - 1).
    information += std::max(0.0, fit.weight[i] * (2.0 * fit.weight[i] - 1.0)) * j * j.transpose();
    score[i] = fit.weight[i] * r * j;
    weights += fit.weight[i];
  }
  Mat5 middle = Mat5::Zero();
  for (std::size_t i = 0; i < n; ++i) middle += score[i] * score[i].transpose();
  const int lags = std::min(neighbours, static_cast<int>(n / 4));
  for (int lag = 1; lag <= lags; ++lag) {
    const double bartlett = 1.0 - lag / (lags + 1.0);
    Mat5 sum = Mat5::Zero();
    for (std::size_t i = 0; i < n; ++i) {
      sum += score[i] * score[(i + static_cast<std::size_t>(lag)) % n].transpose();
    }
    middle += bartlett * (sum + sum.transpose());
  }
  middle *= weights / std::max(1.0, weights - 5.0);
  middle += prior_information * fit.noise_px * fit.noise_px;
  const Mat5 inverse = information.inverse();
  return inverse * middle * inverse;
}

}  // namespace

RimEllipse Ellipse::axes() const {
  const Eigen::SelfAdjointEigenSolver<Eigen::Matrix2d> solver(shape_of(p));
  const Eigen::Vector2d major = solver.eigenvectors().col(1);
  double angle = std::atan2(major[1], major[0]);
  if (angle <= -0.5 * std::numbers::pi) angle += std::numbers::pi;
  if (angle > 0.5 * std::numbers::pi) angle -= std::numbers::pi;
  return {solver.eigenvalues()[1], solver.eigenvalues()[0], angle};
}

double Ellipse::radius_px(double azimuth_rad) const {
  const Eigen::Vector2d towards(std::cos(azimuth_rad), std::sin(azimuth_rad));
  return 1.0 / (shape_of(p).inverse() * towards).norm();
}

double Ellipse::distance_px(ImagePoint at, Vec5* jacobian) const {
  const Eigen::Matrix2d shape = shape_of(p);
  const Eigen::Vector2d y(at.u_px - p[0], at.v_px - p[1]);
  const Eigen::Vector2d unit = shape.inverse() * y;
  double t = std::atan2(unit[1], unit[0]);
  for (int k = 0; k < 20; ++k) {
    const Eigen::Vector2d cs(std::cos(t), std::sin(t));
    const Eigen::Vector2d x = shape * cs;
    const Eigen::Vector2d x1 = shape * Eigen::Vector2d(-cs[1], cs[0]);
    const double g = (x - y).dot(x1);
    const double curve = x1.squaredNorm() - (x - y).dot(x);
    // Inside a strongly bent part Newton would climb; Gauss-Newton does not.
    const double h = curve > 0.1 * x1.squaredNorm() ? curve : x1.squaredNorm();
    const double step = std::clamp(g / h, -0.5, 0.5);
    t -= step;
    if (std::abs(step) < 1e-14) break;
  }
  const Eigen::Vector2d cs(std::cos(t), std::sin(t));
  const Eigen::Vector2d x1 = shape * Eigen::Vector2d(-cs[1], cs[0]);
  const Eigen::Vector2d normal = Eigen::Vector2d(x1[1], -x1[0]).normalized();  // outwards
  if (jacobian != nullptr) {
    *jacobian << -normal[0], -normal[1], -normal[0] * cs[0], -normal[1] * cs[1],
        -normal[0] * cs[1] - normal[1] * cs[0];
  }
  return normal.dot(y - shape * cs);
}

Ellipse circle(ImagePoint centre, double radius_px) {
  Ellipse ellipse;
  ellipse.p << centre.u_px, centre.v_px, radius_px, radius_px, 0.0;
  return ellipse;
}

Ellipse ellipse_of(ImagePoint centre, const RimEllipse& axes) {
  const double c = std::cos(axes.angle_rad);
  const double s = std::sin(axes.angle_rad);
  Ellipse ellipse;
  ellipse.p << centre.u_px, centre.v_px, axes.a_px * c * c + axes.b_px * s * s,
      axes.a_px * s * s + axes.b_px * c * c, (axes.a_px - axes.b_px) * c * s;
  return ellipse;
}

std::optional<EllipseFit> fit_ellipse(std::span<const ImagePoint> points,
                                      const Ellipse& start,
                                      RoundnessPrior prior,
                                      int neighbours) {
  if (points.size() < 6) return std::nullopt;
  EllipseFit fit;
  fit.ellipse = start;
  constexpr double kLeastNoisePx = 1e-9;  // noise-free points are allowed
  const double radius = start.mean_radius_px();
  double prior_weight = 0.0;
  for (int round = 0; round < 3; ++round) {
    fit.noise_px =
        std::max(kLeastNoisePx, kSdPerMedian * median_abs(distances(points, fit.ellipse)));
    ceres::Problem problem;
    // Cauchy's loss keeps 95 % efficiency on normal errors at 2.385 deviations.
    for (const ImagePoint& at : points) {
      problem.AddResidualBlock(
          new DistanceCost(at), new ceres::CauchyLoss(2.385 * fit.noise_px), fit.ellipse.p.data());
    }
    if (prior.sd_relative > 0.0) {
      prior_weight = fit.noise_px / (prior.sd_relative * radius);
      problem.AddResidualBlock(new RoundCost(prior_weight), nullptr, fit.ellipse.p.data());
    }
    ceres::Solver::Options options;
    options.linear_solver_type = ceres::DENSE_NORMAL_CHOLESKY;
    options.max_num_iterations = 50;
    options.function_tolerance = 1e-14;
    options.parameter_tolerance = 1e-14;
    options.gradient_tolerance = 1e-16;
    options.logging_type = ceres::SILENT;
    ceres::Solver::Summary summary;
    ceres::Solve(options, &problem, &summary);
    const Eigen::Matrix2d shape = shape_of(fit.ellipse.p);
    const double moved = std::hypot(fit.ellipse.p[0] - start.p[0], fit.ellipse.p[1] - start.p[1]);
    if (!summary.IsSolutionUsable() || !fit.ellipse.p.allFinite() || shape.determinant() <= 0.0 ||
        shape.trace() <= 0.0 || moved > 2.0 * radius) {
      return std::nullopt;
    }
  }
  fit.noise_px = std::max(kLeastNoisePx, kSdPerMedian * median_abs(distances(points, fit.ellipse)));
  fit.weight.reserve(points.size());
  for (const ImagePoint& at : points) {
    const double s = fit.ellipse.distance_px(at) / (2.385 * fit.noise_px);
    fit.weight.push_back(1.0 / (1.0 + s * s));
  }
  Mat5 prior_information = Mat5::Zero();
  const double w = prior_weight * prior_weight;
  prior_information(2, 2) = prior_information(3, 3) = 0.25 * w;
  prior_information(2, 3) = prior_information(3, 2) = -0.25 * w;
  prior_information(4, 4) = w;
  fit.cov_px2 = sandwich(points, fit, prior_information, neighbours);
  return fit;
}

}  // namespace rondel::vision
