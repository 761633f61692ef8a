#include "calib/optics/conic_forms.h"

#include <gtest/gtest.h>

#include <cmath>
#include <random>

namespace rondel::optics {
namespace {

using Form = OpticalConic (*)(Spread, Spread);
struct Case {
  const char* name;
  Form form;
  Spread first, second;
};
const Case kCases[] = {
    {"hyperbola", from_hyperbola, {0.0320, 0.0003}, {0.0358, 0.0002}},
    {"ellipse", from_ellipse, {0.05, 0.0005}, {0.04, 0.0004}},
    {"eccentricity", from_eccentricity, {1.5, 0.02}, {0.04, 0.0008}},
    {"focus", from_focus, {1.5, 0.02}, {0.016, 0.0002}},
    {"directrix", from_directrix, {1.5, 0.02}, {0.01067, 0.0002}},
    {"focus and directrix", from_focus_and_directrix, {0.016, 0.0002}, {0.01067, 0.0001}},
    {"focus to directrix", from_focus_to_directrix, {1.5, 0.02}, {0.02667, 0.0003}},
};

TEST(ConicForms, SpreadsAgreeWithSampling) {
  const std::uint32_t seed = 5;
  for (const Case& c : kCases) {
    std::mt19937 random(seed);
    std::normal_distribution<double> normal;
    const OpticalConic centre = c.form(c.first, c.second);
    constexpr int kDraws = 20000;
    double rr = 0.0;
    double kk = 0.0;
    double rk = 0.0;
    for (int i = 0; i < kDraws; ++i) {
      const OpticalConic one = c.form({c.first.value + c.first.sd * normal(random), 0.0},
                                      {c.second.value + c.second.sd * normal(random), 0.0});
      const double r = one.vertex_radius_m.value - centre.vertex_radius_m.value;
      const double k = one.conic_constant.value - centre.conic_constant.value;
      rr += r * r;
      kk += k * k;
      rk += r * k;
    }
    // A standard deviation from 20000 draws is known to 1/sqrt(40000) = 0.5 %, a correlation to
    // 0.7 %; the second order of these spreads adds about as much. Four of those.
    EXPECT_NEAR(std::sqrt(rr / kDraws) / centre.vertex_radius_m.sd, 1.0, 0.03) << c.name;
    EXPECT_NEAR(std::sqrt(kk / kDraws) / centre.conic_constant.sd, 1.0, 0.03) << c.name;
    EXPECT_NEAR(rk / std::sqrt(rr * kk), centre.correlation, 0.03) << c.name;
  }
}

TEST(ConicForms, DescribeTheSameMirror) {
  // e = 3/2, vertex radius 40 mm: focus at R / (1 + e) = 16 mm, directrix at f / e = 10.667 mm;
  // a = R / (e^2 - 1) = 32 mm, b = sqrt(a R) = 35.777 mm.
  const OpticalConic ways[] = {from_hyperbola({0.032, 0.0}, {std::sqrt(0.032 * 0.040), 0.0}),
                               from_eccentricity({1.5, 0.0}, {0.040, 0.0}),
                               from_focus({1.5, 0.0}, {0.016, 0.0}),
                               from_directrix({1.5, 0.0}, {0.032 / 3.0, 0.0}),
                               from_focus_and_directrix({0.016, 0.0}, {0.032 / 3.0, 0.0}),
                               from_focus_to_directrix({1.5, 0.0}, {0.016 + 0.032 / 3.0, 0.0})};
  for (const OpticalConic& way : ways) {
    EXPECT_NEAR(way.vertex_radius_m.value, 0.040, 1e-16);
    EXPECT_NEAR(way.conic_constant.value, -2.25, 1e-14);
    EXPECT_EQ(way.vertex_radius_m.sd, 0.0);
    EXPECT_EQ(way.correlation, 0.0);
  }
  const OpticalConic ball = from_ellipse({0.03, 0.0}, {0.03, 0.0});
  EXPECT_NEAR(ball.conic_constant.value, 0.0, 1e-15);
  EXPECT_NEAR(ball.vertex_radius_m.value, 0.03, 1e-16);
}

TEST(ConicForms, HyperbolaOfEccentricityThreeHalves) {
  // At the vertex the focus is 3 parts away and the directrix 2, not the other way round.
  EXPECT_NEAR(
      from_focus_and_directrix({0.003, 0.0}, {0.002, 0.0}).conic_constant.value, -2.25, 1e-14);
}

}  // namespace
}  // namespace rondel::optics
