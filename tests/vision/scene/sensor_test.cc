#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <opencv2/core.hpp>

#include "vision/scene/light_colour.h"
#include "vision/scene/noise.h"
#include "vision/scene/render.h"

namespace rondel::scene {
namespace {

/// A camera without a fault.
Sensor ideal() {
  Sensor sensor;
  sensor.vignetting = 0.0;
  sensor.defocus_px = 0.0;
  sensor.glare = 0.0;
  sensor.full_well_e = 0.0;
  sensor.bayer = false;
  return sensor;
}

/// A light that is white for the camera.
Light white_light() {
  Light light;
  light.white_kelvin = 5000.0;
  return light;
}

/// What a grey of that reflectance sends under `kelvin`, B, G, R.
cv::Vec3f grey(double level, double kelvin = 5000.0) {
  const Vec3 c = level * light_colour(kelvin);
  return {static_cast<float>(c.z), static_cast<float>(c.y), static_cast<float>(c.x)};
}

TEST(Sensor, ItsWhiteIsGreyAtTheCurvesLevel) {
  for (const double level : {0.02, 0.18, 0.5}) {
    const cv::Mat linear(8, 8, CV_32FC3, grey(level));
    const cv::Mat bgr = expose(linear, ideal(), white_light(), 1);
    // Luminance 1 is not green 1: the white balance scales to green.
    const double expected = 255.0 * srgb_from_linear(level * light_colour(5000.0).y);
    for (int channel = 0; channel < 3; ++channel) {
      EXPECT_NEAR(bgr.at<cv::Vec3b>(4, 4)[channel], expected, 0.51) << level << " " << channel;
    }
  }
}

TEST(Sensor, WhiteBalanceErrorsScaleRedAndBlueInLinearLight) {
  Light light = white_light();
  light.white_error_red = 1.2;
  light.white_error_blue = 0.8;
  const cv::Mat linear(8, 8, CV_32FC3, grey(0.3));
  const cv::Mat bgr = expose(linear, ideal(), light, 1);
  const double green = 0.3 * light_colour(5000.0).y;
  EXPECT_NEAR(bgr.at<cv::Vec3b>(4, 4)[0], 255.0 * srgb_from_linear(0.8 * green), 0.51);
  EXPECT_NEAR(bgr.at<cv::Vec3b>(4, 4)[1], 255.0 * srgb_from_linear(green), 0.51);
  EXPECT_NEAR(bgr.at<cv::Vec3b>(4, 4)[2], 255.0 * srgb_from_linear(1.2 * green), 0.51);
}

TEST(Sensor, VignettingDarkensTheCornerByItsShareAndLeavesTheMiddle) {
  Sensor sensor = ideal();
  sensor.vignetting = 0.4;
  const cv::Mat linear(121, 161, CV_32FC3, grey(0.4));
  const cv::Mat bgr = expose(linear, sensor, white_light(), 1);
  const double green = 0.4 * light_colour(5000.0).y;
  EXPECT_NEAR(bgr.at<cv::Vec3b>(60, 80)[1], 255.0 * srgb_from_linear(green), 0.51);
  EXPECT_NEAR(bgr.at<cv::Vec3b>(0, 0)[1], 255.0 * srgb_from_linear(0.6 * green), 0.51);
}

TEST(Sensor, NoiseHasTheVarianceOfCountedElectronsAndReadNoise) {
  // A flat field in the middle of the curve: the linear variance is (N + r^2) / full_well^2, ten
  // bits and the eight bits after the curve add their rounding, known to second order.
  Sensor sensor = ideal();
  sensor.full_well_e = 4000.0;
  sensor.read_noise_e = 12.0;
  const cv::Mat linear(200, 200, CV_32FC3, grey(0.25));
  const cv::Mat bgr = expose(linear, sensor, white_light(), 42);
  const Vec3 white = light_colour(5000.0);
  const double sensitivity[3] = {0.62, 1.0, 0.70};
  const double sent[3] = {0.25 * white.z, 0.25 * white.y, 0.25 * white.x};
  const double gain[3] = {
      white.y / white.z / sensitivity[0], 1.0, white.y / white.x / sensitivity[2]};
  for (int channel = 0; channel < 3; ++channel) {
    double mean = 0.0;
    double square = 0.0;
    for (const cv::Vec3b& pixel : cv::Mat_<cv::Vec3b>(bgr)) mean += pixel[channel];
    mean /= 40000.0;
    for (const cv::Vec3b& pixel : cv::Mat_<cv::Vec3b>(bgr)) {
      square += (pixel[channel] - mean) * (pixel[channel] - mean);
    }
    const double electrons = sensitivity[channel] * sent[channel] * sensor.full_well_e;
    const double raw_variance =
        (electrons + 144.0) / (4000.0 * 4000.0) + 1.0 / (12.0 * 1023 * 1023);
    const double level = 0.25 * white.y;
    const double slope = 255.0 * 1.055 / 2.4 * std::pow(level, 1.0 / 2.4 - 1.0);
    const double expected = slope * slope * gain[channel] * gain[channel] * raw_variance + 1.0 / 12;
    // Standard error of a variance from 40 000 values: 0.7 %; the curve's bend adds a percent.
    EXPECT_NEAR(square / 39999.0 / expected, 1.0, 0.05) << channel;
    EXPECT_NEAR(mean, 255.0 * srgb_from_linear(level), 0.15) << channel;
  }
}

TEST(Sensor, FewElectronsAreCountedAfterPoisson) {
  // Dark enough that red and blue clip at no electron: means stay right, and the spread too.
  Sensor sensor = ideal();
  sensor.full_well_e = 1023.0;  // an electron a step
  sensor.read_noise_e = 0.0;
  const double level = 4.0 / 1023.0;
  const cv::Mat linear(300, 300, CV_32FC3, grey(level / light_colour(5000.0).y));
  const cv::Mat bgr = expose(linear, sensor, white_light(), 7);
  // Green has gain 1: the share of pixels without an electron is exp(-4).
  int none = 0;
  for (const cv::Vec3b& pixel : cv::Mat_<cv::Vec3b>(bgr)) none += pixel[1] == 0 ? 1 : 0;
  const double share = std::exp(-4.0);
  const double error = std::sqrt(share * (1.0 - share) / 90000.0);
  EXPECT_NEAR(none / 90000.0, share, 4.0 * error);
}

TEST(Sensor, SeedPicksTheNoise) {
  const cv::Mat linear(32, 32, CV_32FC3, grey(0.2));
  const Sensor sensor;
  const cv::Mat a = expose(linear, sensor, white_light(), 5);
  const cv::Mat b = expose(linear, sensor, white_light(), 5);
  const cv::Mat c = expose(linear, sensor, white_light(), 6);
  EXPECT_EQ(cv::norm(a, b, cv::NORM_INF), 0.0);
  EXPECT_GT(cv::norm(a, c, cv::NORM_L1), 0.0);
}

TEST(Sensor, MosaicKeepsFlatFieldsAndRampsAndColoursEdges) {
  Sensor sensor = ideal();
  sensor.bayer = true;
  cv::Mat linear(40, 60, CV_32FC3, grey(0.3));
  const cv::Mat flat = expose(linear, sensor, white_light(), 1);
  const double level = 255.0 * srgb_from_linear(0.3 * light_colour(5000.0).y);
  for (const cv::Vec3b& pixel : cv::Mat_<cv::Vec3b>(flat)) {
    for (int channel = 0; channel < 3; ++channel) ASSERT_NEAR(pixel[channel], level, 0.51);
  }
  // A grey step: away from it nothing changes, across it colours appear as in any such camera.
  linear.colRange(30, 60).setTo(cv::Scalar(grey(0.05)));
  const cv::Mat edge = expose(linear, sensor, white_light(), 1);
  int coloured = 0;
  for (int u = 0; u < 60; ++u) {
    const cv::Vec3b pixel = edge.at<cv::Vec3b>(20, u);
    const int spread =
        std::max({pixel[0], pixel[1], pixel[2]}) - std::min({pixel[0], pixel[1], pixel[2]});
    if (std::abs(u - 29.5) > 3.0) {
      EXPECT_LE(spread, 1) << u;
    } else {
      coloured = std::max(coloured, spread);
    }
  }
  EXPECT_GT(coloured, 5);
}

TEST(Sensor, DefocusSpreadsAPointAsAGaussian) {
  Sensor sensor = ideal();
  sensor.defocus_px = 1.5;
  cv::Mat linear = cv::Mat::zeros(41, 41, CV_32FC3);
  linear.at<cv::Vec3f>(20, 20) = grey(4.0);
  const cv::Mat bgr = expose(linear, sensor, white_light(), 1);
  const double peak = 4.0 * light_colour(5000.0).y / (2.0 * std::numbers::pi * 2.25);
  for (int d = 0; d <= 3; ++d) {
    const double expected = 255.0 * srgb_from_linear(peak * std::exp(-d * d / 4.5));
    EXPECT_NEAR(bgr.at<cv::Vec3b>(20, 20 + d)[1], expected, 3.0) << d;
  }
}

TEST(Sensor, Rgb565KeepsTheTopBits) {
  Sensor sensor = ideal();
  cv::Mat linear(4, 256, CV_32FC3);
  for (int u = 0; u < 256; ++u) {
    linear.col(u).setTo(cv::Scalar(grey(linear_from_srgb(u / 255.0) / light_colour(5000.0).y)));
  }
  const cv::Mat full = expose(linear, sensor, white_light(), 1);
  sensor.rgb565 = true;
  const cv::Mat kept = expose(linear, sensor, white_light(), 1);
  for (int u = 0; u < 256; ++u) {
    const cv::Vec3b a = full.at<cv::Vec3b>(0, u);
    const cv::Vec3b b = kept.at<cv::Vec3b>(0, u);
    EXPECT_EQ(a[0] >> 3, b[0] >> 3) << u;
    EXPECT_EQ(a[1] >> 2, b[1] >> 2) << u;
    EXPECT_EQ(a[2] >> 3, b[2] >> 3) << u;
    // The dropped bits are filled with the top ones, so that black is 0 and white 255.
    EXPECT_EQ(b[0] & 7, b[0] >> 5) << u;
    EXPECT_EQ(b[1] & 3, b[1] >> 6) << u;
  }
}

TEST(Noise, NormalsHaveTheirMoments) {
  double sum = 0.0;
  double square = 0.0;
  double fourth = 0.0;
  double product = 0.0;
  constexpr int kCount = 100000;
  for (std::uint64_t k = 0; k < kCount; ++k) {
    const auto [a, b] = normals(99, k);
    sum += a + b;
    square += a * a + b * b;
    fourth += a * a * a * a + b * b * b * b;
    product += a * b;
  }
  const double n = 2.0 * kCount;
  // Four standard errors: of the mean 1, of the square sqrt(2), of the fourth power sqrt(96).
  EXPECT_NEAR(sum / n, 0.0, 4.0 / std::sqrt(n));
  EXPECT_NEAR(square / n, 1.0, 4.0 * std::sqrt(2.0 / n));
  EXPECT_NEAR(fourth / n, 3.0, 4.0 * std::sqrt(96.0 / n));
  EXPECT_NEAR(product / kCount, 0.0, 4.0 / std::sqrt(kCount));
}

}  // namespace
}  // namespace rondel::scene
