// Lights against the standards' and tables' own numbers.
#include "calib/colour/lights.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>

namespace rondel::colour {
namespace {

// CIE, 2 degree observer.
constexpr Chromaticity kA = {0.44758, 0.40745};
constexpr Chromaticity kD50 = {0.34570, 0.35850};
constexpr Chromaticity kD65 = {0.31270, 0.32900};
constexpr Chromaticity kD75 = {0.29903, 0.31488};
constexpr Chromaticity kF2 = {0.37210, 0.37510};
constexpr Chromaticity kF11 = {0.38050, 0.37690};
constexpr Chromaticity kF12 = {0.43700, 0.40420};
constexpr Chromaticity kLedB3 = {0.3756, 0.3723};

// IEC 61966-2-1.
TEST(Lights, TransferCurveIsSrgb) {
  EXPECT_NEAR(srgb_from_linear(0.18), 0.461356129500442, 1e-14);
  EXPECT_NEAR(linear_from_srgb(128.0 / 255.0), 0.215860500114, 1e-12);
  EXPECT_NEAR(linear_from_srgb(188.0 / 255.0), 0.502886458033, 1e-12);
  for (int k = 0; k < 256; ++k) {
    EXPECT_NEAR(255.0 * srgb_from_linear(linear_from_srgb(k / 255.0)), k, 1e-9);
  }
}

// The CIE's formula for daylight at its own nodes.
TEST(Lights, DaylightLocus) {
  EXPECT_NEAR(daylight(4000.0).x, 0.382343625, 1e-9);
  EXPECT_NEAR(daylight(4000.0).y, 0.383766261, 1e-9);
  EXPECT_NEAR(daylight(7000.0).x, 0.305357431, 1e-9);
  EXPECT_NEAR(daylight(7000.0).y, 0.321646345, 1e-9);
  // D50, D65 and D75 are named before the change of the second radiation constant: 1.4388 / 1.4380.
  const double scale = 1.4388 / 1.4380;
  EXPECT_NEAR(daylight(5000.0 * scale).x, kD50.x, 2e-4);
  EXPECT_NEAR(daylight(6500.0 * scale).x, kD65.x, 2e-4);
  EXPECT_NEAR(daylight(7500.0 * scale).x, kD75.x, 2e-4);
}

// Kang et al. 2002; CIE illuminant A is a Planckian radiator at 2856 K.
TEST(Lights, PlanckianLocus) {
  EXPECT_NEAR(planckian(2856.0).x, 0.447071, 1e-6);
  EXPECT_NEAR(planckian(2856.0).y, 0.407509, 1e-6);
  EXPECT_NEAR(planckian(4000.0).x, 0.380528, 1e-6);
  EXPECT_NEAR(planckian(4000.0).y, 0.376734, 1e-6);
  EXPECT_NEAR(planckian(7000.0).x, 0.306374, 1e-6);
  EXPECT_NEAR(planckian(7000.0).y, 0.316553, 1e-6);
  EXPECT_NEAR(planckian(2856.0).x, kA.x, 1e-3);
  EXPECT_NEAR(planckian(2856.0).y, kA.y, 1e-3);
}

TEST(Lights, HallIsPlanckianBelow4000AndDaylightAbove) {
  EXPECT_EQ(light_at(3999.0).x, planckian(3999.0).x);
  EXPECT_EQ(light_at(4000.0).x, daylight(4000.0).x);
}

// Worked out in double precision from the CIE's chromaticities and IEC 61966-2-1's matrix.
TEST(Lights, GainsOfTheIlluminants) {
  struct Row {
    Chromaticity light;
    double red, blue;
  };
  for (const Row& row : {Row{kA, 2.233, 0.282},
                         Row{kF12, 2.096, 0.321},
                         Row{kF11, 1.529, 0.576},
                         Row{kF2, 1.423, 0.598},
                         Row{kLedB3, 1.505, 0.613},
                         Row{kD50, 1.206, 0.740},
                         Row{kD75, 0.923, 1.138}}) {
    const Gains gains = camera_gains(row.light, kD65);
    EXPECT_NEAR(gains.red, row.red, 0.0015);
    EXPECT_NEAR(gains.blue, row.blue, 0.0015);
  }
}

double hue_deg(double r, double g, double b) {
  const double high = std::max({r, g, b});
  const double chroma = high - std::min({r, g, b});
  if (high == r) return 60.0 * (g - b) / chroma;
  if (high == g) return 60.0 * ((b - r) / chroma + 2.0);
  return 60.0 * ((r - g) / chroma + 4.0);
}

// A yellow of 52.5 degrees moves to 43.2 under F11 and 36.8 under A (computed with the gains
// above).
TEST(Lights, AYellowTurnsTowardsOrangeInWarmLight) {
  const Rgb yellow{255, 223, 0};
  EXPECT_NEAR(hue_deg(255, 223, 0), 52.5, 0.05);
  const auto moved = [&](Chromaticity light) {
    LightChange change;
    change.stops = -1.2;  // as bright as can be without clipping
    change.gains = camera_gains(light, kD65);
    const Rgb p = ColourShift(change, false)(yellow);
    return hue_deg(p.r, p.g, p.b);
  };
  // Red and green are rounded to levels, at most 255 and about 155: 60 * 0.5 / 155 each.
  EXPECT_NEAR(moved(kF11), 43.2, 0.4);
  EXPECT_NEAR(moved(kA), 36.8, 0.4);
}

TEST(Lights, NoChangeChangesNothing) {
  const ColourShift same({}, false);
  for (int k = 0; k < 256; ++k) {
    const Rgb p{static_cast<std::uint8_t>(k), static_cast<std::uint8_t>(255 - k), 7};
    EXPECT_EQ(same(p), p);
  }
}

TEST(Lights, AStopDoublesLinearLightAndClips) {
  const ColourShift brighter({1.0, 0.0, {}}, false);
  const Rgb p = brighter({100, 200, 10});
  EXPECT_NEAR(linear_from_srgb(p.r / 255.0), 2.0 * linear_from_srgb(100.0 / 255.0), 0.005);
  EXPECT_EQ(p.g, 255);
}

TEST(Lights, RoundingIsRgb565s) {
  const ColourShift coarse({}, true);
  for (int k = 0; k < 256; ++k) {
    const auto level = static_cast<std::uint8_t>(k);
    EXPECT_EQ(coarse({level, level, level}), from_rgb565(to_rgb565({level, level, level})));
  }
}

TEST(Lights, ChangesSpanWhatTheVenueSays) {
  LightingSpec spec;
  spec.stops = {-1.2, 0.5};
  spec.kelvin = {3000.0, 6000.0};
  const auto changes = changes_of(spec);
  EXPECT_EQ(text_of(changes.front()), "as captured");
  double low = 0.0;
  double high = 0.0;
  double cold = 0.0;
  double warm = 1e9;
  for (const LightChange& change : changes) {
    low = std::min(low, change.stops);
    high = std::max(high, change.stops);
    cold = std::max(cold, change.kelvin);
    if (change.kelvin > 0.0) warm = std::min(warm, change.kelvin);
  }
  EXPECT_NEAR(low, -1.2, 1e-12);
  EXPECT_NEAR(high, 0.5, 1e-12);
  EXPECT_NEAR(warm, 3000.0, 1e-6);
  EXPECT_NEAR(cold, 6000.0, 1e-6);
  spec.auto_white_balance = true;
  for (const LightChange& change : changes_of(spec)) EXPECT_EQ(change.kelvin, 0.0);
}

}  // namespace
}  // namespace rondel::colour
