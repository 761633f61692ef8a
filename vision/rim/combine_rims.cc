#include "vision/rim/combine_rims.h"

#include <Eigen/Dense>
#include <algorithm>
#include <cassert>
#include <cmath>

#include "vision/rim/ellipse.h"

namespace rondel::vision {
namespace {

double median(std::vector<double> values) {
  const auto middle = values.begin() + static_cast<std::ptrdiff_t>(values.size() / 2);
  std::nth_element(values.begin(), middle, values.end());
  return *middle;
}

Eigen::Matrix2d matrix(const std::array<double, 3>& cov) {
  Eigen::Matrix2d m;
  m << cov[0], cov[1], cov[1], cov[2];
  return m;
}

/// Errors of a frame's centre that every frame of the same scene shares.
constexpr double kSharedPx = 0.03;
/// A frame is left out when its centre is off by more than this many deviations and pixels.
constexpr double kMostDeviations = 4.0;
constexpr double kLeastMovePx = 0.6;

struct Mean {
  Eigen::Vector2d at = Eigen::Vector2d::Zero();
  Eigen::Matrix2d cov = Eigen::Matrix2d::Identity();
  double per_degree = 0.0;  ///< chi squared over its degrees of freedom
  int count = 0;
};

Mean mean_of(std::span<const ObservedPoint> points) {
  Mean mean;
  Eigen::Matrix2d information = Eigen::Matrix2d::Zero();
  Eigen::Vector2d right = Eigen::Vector2d::Zero();
  for (const ObservedPoint& p : points) {
    const Eigen::Matrix2d w = matrix(p.cov_px2).inverse();
    information += w;
    right += w * Eigen::Vector2d(p.at.u_px, p.at.v_px);
  }
  mean.count = static_cast<int>(points.size());
  mean.cov = information.inverse();
  mean.at = mean.cov * right;
  double chi = 0.0;
  for (const ObservedPoint& p : points) {
    const Eigen::Vector2d d = Eigen::Vector2d(p.at.u_px, p.at.v_px) - mean.at;
    chi += d.dot(matrix(p.cov_px2).inverse() * d);
  }
  if (mean.count > 1) mean.per_degree = chi / (2.0 * (mean.count - 1));
  return mean;
}

ObservedPoint observed(const Mean& mean) {
  const Eigen::Matrix2d cov = mean.cov * std::max(1.0, mean.per_degree);
  const double shared = kSharedPx * kSharedPx;
  return {{mean.at[0], mean.at[1]}, {cov(0, 0) + shared, cov(0, 1), cov(1, 1) + shared}};
}

}  // namespace

CombinedRims combine_rims(std::span<const Rim> rims) {
  assert(!rims.empty());
  CombinedRims combined;
  std::vector<double> us;
  std::vector<double> vs;
  std::vector<double> radii;
  for (const Rim& rim : rims) {
    us.push_back(rim.centre.at.u_px);
    vs.push_back(rim.centre.at.v_px);
    radii.push_back(0.5 * (rim.ellipse.a_px + rim.ellipse.b_px));
  }
  const ImagePoint middle{median(us), median(vs)};
  const double radius = median(radii);
  std::vector<double> off;
  for (const Rim& rim : rims) {
    off.push_back(std::hypot(rim.centre.at.u_px - middle.u_px, rim.centre.at.v_px - middle.v_px));
  }
  const double usual = 1.4826 * median(off);
  std::vector<ObservedPoint> centres;
  std::vector<ObservedPoint> reflections;
  Eigen::Matrix<double, 5, 1> shape = Eigen::Matrix<double, 5, 1>::Zero();
  double weights = 0.0;
  for (std::size_t i = 0; i < rims.size(); ++i) {
    const Rim& rim = rims[i];
    const double sd = std::sqrt(std::max(rim.centre.cov_px2[0], rim.centre.cov_px2[2]));
    const double allowed = std::max({kLeastMovePx, kMostDeviations * sd, 3.0 * usual});
    const bool agrees = off[i] <= allowed && std::abs(radii[i] - radius) <= std::max(1.0, allowed);
    combined.agrees.push_back(agrees);
    if (!agrees) continue;
    centres.push_back(rim.centre);
    if (rim.reflection) reflections.push_back(*rim.reflection);
    const double w = 1.0 / (rim.radius_sd_px * rim.radius_sd_px + kSharedPx * kSharedPx);
    shape += w * ellipse_of({0.0, 0.0}, rim.ellipse).p;
    weights += w;
  }
  const Mean mean = mean_of(centres);
  combined.result.centre = observed(mean);
  Ellipse ellipse;
  ellipse.p = shape / weights;
  combined.result.rim = ellipse.axes();
  combined.radius_sd_px = std::sqrt(1.0 / weights + kSharedPx * kSharedPx);
  combined.result.frames_used = static_cast<int>(centres.size());
  double squares = 0.0;
  for (const ObservedPoint& c : centres) {
    squares += std::pow(c.at.u_px - mean.at[0], 2) + std::pow(c.at.v_px - mean.at[1], 2);
  }
  if (centres.size() > 1) {
    combined.scatter_px = std::sqrt(squares / (2.0 * static_cast<double>(centres.size() - 1)));
  }
  if (2 * reflections.size() >= centres.size() && !reflections.empty()) {
    combined.result.reflection = observed(mean_of(reflections));
  }
  // The mirror moved during capture: early and late frames have different centres.
  if (centres.size() >= 4) {
    for (std::size_t cut = 2; cut + 2 <= centres.size(); ++cut) {
      const Mean early = mean_of(std::span(centres).first(cut));
      const Mean late = mean_of(std::span(centres).subspan(cut));
      const Eigen::Vector2d move = late.at - early.at;
      const double spread = std::max(1.0, 0.5 * (early.per_degree + late.per_degree));
      const double chi = move.dot(((early.cov + late.cov) * spread).inverse() * move);
      // 20 is chi squared of two degrees at 5e-5: the cut is the best of many.
      if (chi > 20.0 && move.norm() > 0.5) {
        combined.result.frames_disagree = true;
        combined.largest_move_px = std::max(combined.largest_move_px, move.norm());
      }
    }
  }
  const std::size_t left_out = rims.size() - centres.size();
  if (4 * left_out > rims.size()) {
    combined.result.frames_disagree = true;
    combined.largest_move_px =
        std::max(combined.largest_move_px, *std::max_element(off.begin(), off.end()));
  }
  return combined;
}

}  // namespace rondel::vision
