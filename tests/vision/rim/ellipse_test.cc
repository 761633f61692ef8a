#include "vision/rim/ellipse.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <random>

namespace rondel::vision {
namespace {

std::vector<ImagePoint> on_ellipse(ImagePoint centre,
                                   RimEllipse axes,
                                   int count,
                                   double arc = 1.0) {
  std::vector<ImagePoint> points;
  for (int k = 0; k < count; ++k) {
    const double t = 2.0 * std::numbers::pi * arc * k / count;
    const double along = axes.a_px * std::cos(t);
    const double across = axes.b_px * std::sin(t);
    points.push_back(
        {centre.u_px + along * std::cos(axes.angle_rad) - across * std::sin(axes.angle_rad),
         centre.v_px + along * std::sin(axes.angle_rad) + across * std::cos(axes.angle_rad)});
  }
  return points;
}

/// On noise-free points a direct algebraic fit (Fitzgibbon et al., 1999) and ours must agree. The
/// library takes single precision: points are rounded to it for both, which moves the ellipse by no
/// more than a float's spacing at 200, 1.5e-5 px, over the root of the points' number: 1e-6.
TEST(Ellipse, AgreesWithDirectFitOnNoiseFreePoints) {
  for (const RimEllipse axes : {RimEllipse{112.0, 111.7, 0.4}, RimEllipse{90.0, 60.0, -1.1}}) {
    std::vector<ImagePoint> points = on_ellipse({16.0, -8.0}, axes, 400);
    std::vector<cv::Point2f> rounded;
    for (ImagePoint& p : points) {
      rounded.emplace_back(static_cast<float>(p.u_px), static_cast<float>(p.v_px));
      p = {double{rounded.back().x}, double{rounded.back().y}};
    }
    const auto fit = fit_ellipse(points, circle({15.0, -7.0}, 85.0));
    ASSERT_TRUE(fit);
    const cv::RotatedRect direct = cv::fitEllipseDirect(rounded);
    const RimEllipse found = fit->ellipse.axes();
    EXPECT_NEAR(fit->ellipse.centre().u_px, 16.0, 1e-6);
    EXPECT_NEAR(fit->ellipse.centre().v_px, -8.0, 1e-6);
    EXPECT_NEAR(found.a_px, axes.a_px, 1e-6);
    EXPECT_NEAR(found.b_px, axes.b_px, 1e-6);
    // The library's own answer comes in single precision: 8e-6 px at 100 px.
    EXPECT_NEAR(fit->ellipse.centre().u_px, double{direct.center.x}, 1e-5);
    EXPECT_NEAR(fit->ellipse.centre().v_px, double{direct.center.y}, 1e-5);
    EXPECT_NEAR(2.0 * found.a_px, double{std::max(direct.size.width, direct.size.height)}, 2e-4);
    EXPECT_NEAR(2.0 * found.b_px, double{std::min(direct.size.width, direct.size.height)}, 2e-4);
  }
}

TEST(Ellipse, DistanceIsToTheNearestPointOfTheCurve) {
  const Ellipse ellipse = ellipse_of({10.0, 20.0}, {80.0, 50.0, 0.7});
  const std::vector<ImagePoint> curve = on_ellipse({10.0, 20.0}, {80.0, 50.0, 0.7}, 200000);
  for (const ImagePoint at : {ImagePoint{95.0, 60.0}, {40.0, 20.0}, {-30.0, -40.0}, {10.0, 70.0}}) {
    double nearest = 1e9;
    for (const ImagePoint& p : curve) {
      nearest = std::min(nearest, std::hypot(p.u_px - at.u_px, p.v_px - at.v_px));
    }
    // The curve's points are 2.5e-3 px apart: half of that, squared, over twice 10 px.
    EXPECT_NEAR(std::abs(ellipse.distance_px(at)), nearest, 1e-6);
  }
}

TEST(Ellipse, StatedDeviationIsTheScatter) {
  std::mt19937 random(3);
  std::normal_distribution<double> noise(0.0, 0.2);
  constexpr int kDraws = 60;
  double squares = 0.0;
  double stated = 0.0;
  for (int draw = 0; draw < kDraws; ++draw) {
    auto points = on_ellipse({0.0, 0.0}, {100.0, 99.9, 0.0}, 180, 0.6);
    for (ImagePoint& p : points) {
      p.u_px += noise(random);
      p.v_px += noise(random);
    }
    const auto fit = fit_ellipse(points, circle({1.0, 1.0}, 99.0), {}, 3);
    ASSERT_TRUE(fit);
    squares += std::pow(fit->ellipse.p[0], 2) + std::pow(fit->ellipse.p[1], 2);
    stated += fit->cov_px2(0, 0) + fit->cov_px2(1, 1);
  }
  // Along the hidden side the centre is known much worse than across it, so that 60 draws count as
  // 60 values: a deviation is known to 1 / sqrt(2 * 60) = 9 %; four of them.
  EXPECT_NEAR(std::sqrt(squares / stated), 1.0, 0.37);
}

TEST(Ellipse, GrossErrorsDoNotMoveIt) {
  auto points = on_ellipse({3.0, 4.0}, {100.0, 99.5, 0.3}, 360);
  for (std::size_t k = 40; k < 90; ++k) points[k].u_px += 4.0;
  const auto fit = fit_ellipse(points, circle({0.0, 0.0}, 98.0), {0.003});
  ASSERT_TRUE(fit);
  EXPECT_NEAR(fit->ellipse.centre().u_px, 3.0, 0.01);
  EXPECT_LT(fit->weight[60], 0.1);
}

}  // namespace
}  // namespace rondel::vision
