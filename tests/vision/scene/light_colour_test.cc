#include "vision/scene/light_colour.h"

#include <gtest/gtest.h>

#include <cmath>

#include "vision/scene/scene.h"

namespace rondel::scene {
namespace {

TEST(SrgbCurve, ValuesOfTheStandard) {
  // IEC 61966-2-1, computed from its formula.
  EXPECT_NEAR(srgb_from_linear(0.18), 0.461356129500442, 1e-14);
  EXPECT_NEAR(linear_from_srgb(128.0 / 255.0), 0.215860500114, 1e-12);
  EXPECT_NEAR(linear_from_srgb(188.0 / 255.0), 0.502886458033, 1e-12);
  EXPECT_EQ(srgb_from_linear(0.0), 0.0);
  EXPECT_NEAR(srgb_from_linear(1.0), 1.0, 1e-15);
  // The standard's own figures make the two pieces meet to 1e-7 only.
  EXPECT_NEAR(srgb_from_linear(0.0031308), srgb_from_linear(0.00313081), 1e-6);
  for (int k = 0; k <= 255; ++k) {
    EXPECT_NEAR(srgb_from_linear(linear_from_srgb(k / 255.0)), k / 255.0, 1e-6) << k;
  }
  const Vec3 colour = srgb(128, 188, 255);
  EXPECT_NEAR(colour.x, 0.215860500114, 1e-12);
  EXPECT_NEAR(colour.y, 0.502886458033, 1e-12);
  EXPECT_NEAR(colour.z, 1.0, 1e-15);
}

struct Chromaticity {
  double x, y;
};
Chromaticity chromaticity(Vec3 rgb) {
  // Linear sRGB to XYZ, IEC 61966-2-1, the matrix to four digits as printed there.
  const double x = 0.4124 * rgb.x + 0.3576 * rgb.y + 0.1805 * rgb.z;
  const double y = 0.2126 * rgb.x + 0.7152 * rgb.y + 0.0722 * rgb.z;
  const double z = 0.0193 * rgb.x + 0.1192 * rgb.y + 0.9505 * rgb.z;
  return {x / (x + y + z), y / (x + y + z)};
}

TEST(LightColour, PlanckianAndDaylightLoci) {
  // Kang et al. 2002 at 2856 K; the CIE daylight locus at 7000 K; the published chromaticities of
  // D65 (its nominal 6504 K) and D75 (7504 K). 5e-4 is what the printed matrices leave.
  const struct {
    double kelvin, x, y;
  } samples[] = {{2856.0, 0.447071, 0.407509},
                 {7000.0, 0.305357431, 0.321646345},
                 {6504.0, 0.31270, 0.32900},
                 {7504.0, 0.29903, 0.31488}};
  for (const auto& sample : samples) {
    const Chromaticity c = chromaticity(light_colour(sample.kelvin));
    EXPECT_NEAR(c.x, sample.x, 5e-4) << sample.kelvin;
    EXPECT_NEAR(c.y, sample.y, 5e-4) << sample.kelvin;
  }
}

TEST(LightColour, GainsOfACameraBalancedForDaylight) {
  // CIE illuminant A and D75 seen by a camera balanced for D65, linear sRGB over green, computed
  // from their chromaticities; A is a black body of 2856 K, 0.0005 off the locus's formula.
  const Vec3 white = light_colour(6504.0);
  const auto gains = [&](double kelvin) {
    const Vec3 c = light_colour(kelvin);
    return std::pair{(c.x / white.x) / (c.y / white.y), (c.z / white.z) / (c.y / white.y)};
  };
  const auto [red_a, blue_a] = gains(2856.0);
  EXPECT_NEAR(red_a, 2.233, 0.03);
  EXPECT_NEAR(blue_a, 0.282, 0.01);
  const auto [red_d75, blue_d75] = gains(7504.0);
  EXPECT_NEAR(red_d75, 0.923, 0.005);
  EXPECT_NEAR(blue_d75, 1.138, 0.005);
}

TEST(LightColour, RunsSmoothlyFromWarmToColdAtLuminanceOne) {
  double blue_over_red = 0.0;
  for (double kelvin = 1700.0; kelvin <= 25000.0; kelvin *= 1.01) {
    const Vec3 c = light_colour(kelvin);
    const double ratio = c.z / c.x;
    EXPECT_GE(ratio, blue_over_red) << kelvin;
    EXPECT_LT(ratio - blue_over_red, 1.0) << kelvin;
    blue_over_red = ratio;
    if (kelvin > 1950.0) {
      EXPECT_NEAR(0.2126 * c.x + 0.7152 * c.y + 0.0722 * c.z, 1.0, 1e-3) << kelvin;
    }
  }
}

}  // namespace
}  // namespace rondel::scene
