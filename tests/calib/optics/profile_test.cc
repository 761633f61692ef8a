#include "calib/optics/profile.h"

#include <gtest/gtest.h>

#include <array>
#include <cmath>
#include <random>

#include "calib/base/problem.h"
#include "calib/optics/mirror.h"

namespace rondel::optics {
namespace {

constexpr std::array<double, kProfileModes> kAsMeasured{};

double hyperboloid_sag(double s_m) {
  Mirror<double> m;
  m.vertex_radius_m = 0.040;
  m.conic_constant = -2.25;
  return *sag_m(m, s_m);
}

std::vector<std::pair<double, double>> measured(int count, double sd_m, std::mt19937& random) {
  std::normal_distribution<double> normal;
  std::vector<std::pair<double, double>> points;
  for (int i = 0; i < count; ++i) {
    const double s = 0.032 * i / (count - 1);
    points.emplace_back(s, hyperboloid_sag(s) + sd_m * normal(random));
  }
  return points;
}

TEST(Profile, PassesThroughAnExactParaboloid) {
  std::vector<std::pair<double, double>> points;
  for (int i = 0; i <= 12; ++i) points.emplace_back(0.0025 * i, 12.0 * 0.0025 * 0.0025 * i * i);
  const auto profile = Profile::fit(points, 0.0);
  for (double s = 0.0; s < 0.031; s += 0.0007) {
    const auto at = profile->at(s, kAsMeasured);
    // A quadratic is neither bent by the penalty nor by the spline; 1e-9 m is the arithmetic of a
    // normal matrix whose vertex row has the weight 1e8.
    EXPECT_NEAR(at.sag_m, 12.0 * s * s, 1e-9);
    EXPECT_NEAR(at.slope, 24.0 * s, 1e-6);
  }
  EXPECT_NEAR(profile->vertex_radius_m(), 1.0 / 24.0, 1e-5);
}

TEST(Profile, SmoothsNoiseAndKnowsHowWell) {
  const std::uint32_t seed = 41;
  std::mt19937 random(seed);
  const double sd = 20e-6;
  constexpr int kFits = 200;
  double inside = 0.0;
  double squares = 0.0;
  int places = 0;
  for (int i = 0; i < kFits; ++i) {
    const auto profile = Profile::fit(measured(25, sd, random), sd);
    for (double s = 0.004; s < 0.032; s += 0.004) {
      const double error = profile->at(s, kAsMeasured).sag_m - hyperboloid_sag(s);
      squares += error * error;
      inside += std::abs(error) < 1.96 * profile->sag_sd_m(s) ? 1.0 : 0.0;
      ++places;
    }
  }
  // Smoothing 25 points must do clearly better than one point.
  EXPECT_LT(std::sqrt(squares / places), 0.7 * sd) << "seed " << seed;
  // 200 independent fits: a 95 % band's coverage is known to 1.5 %; Wahba's band covers on average
  // over the curve and is known to run a little low after choosing the smoothing.
  EXPECT_GT(inside / places, 0.90) << "seed " << seed;
  EXPECT_LT(inside / places, 0.985) << "seed " << seed;
}

TEST(Profile, NoiseIsFoundWhenItIsNotGiven) {
  std::mt19937 random(6);
  double sum = 0.0;
  for (int i = 0; i < 40; ++i) sum += Profile::fit(measured(60, 15e-6, random), 0.0)->point_sd_m();
  // 40 fits x about 50 degrees of freedom: 1/sqrt(2 x 2000) = 1.6 %; smoothing adds a bias of few
  // %.
  EXPECT_NEAR(sum / 40.0, 15e-6, 1.5e-6);
}

TEST(Profile, ModesCarryTheUncertainty) {
  std::mt19937 random(7);
  const auto profile = Profile::fit(measured(25, 20e-6, random), 20e-6);
  for (const double s : {0.010, 0.020, 0.030}) {
    double variance = 0.0;
    for (std::size_t m = 0; m < kProfileModes; ++m) {
      std::array<double, kProfileModes> moved{};
      moved[m] = 1.0;
      const double by = profile->at(s, moved).sag_m - profile->at(s, kAsMeasured).sag_m;
      variance += by * by;
    }
    // Three modes of about five degrees of freedom carry most of it, and never more than all.
    EXPECT_GT(std::sqrt(variance), 0.5 * profile->sag_sd_m(s));
    EXPECT_LT(std::sqrt(variance), 1.05 * profile->sag_sd_m(s));
  }
}

TEST(Profile, RefusesWhatIsNoMirror) {
  using Points = std::vector<std::pair<double, double>>;
  EXPECT_THROW(Profile::fit(Points{{0.0, 0.0}, {0.01, 0.001}, {0.02, 0.004}, {0.03, 0.01}}, 0.0),
               InputError)
      << "four points";
  EXPECT_THROW(
      Profile::fit(Points{{0.0, 0.0}, {0.01, 0.0}, {0.02, -1e-3}, {0.03, -2e-3}, {0.04, -4e-3}},
                   0.0),
      InputError)
      << "upside down";
  EXPECT_THROW(
      Profile::fit(
          Points{
              {0.0, 0.0}, {0.01, 4e-3}, {0.02, 1e-3}, {0.03, 0.5e-3}, {0.04, 8e-3}, {0.05, 0.01}},
          1e-6),
      InputError)
      << "falls";
  EXPECT_THROW(
      Profile::fit(Points{{-0.01, 0.0}, {0.01, 0.0}, {0.02, 1e-3}, {0.03, 2e-3}, {0.04, 4e-3}},
                   0.0),
      InputError)
      << "negative distance";
}

TEST(Profile, EndsWhereItWasMeasured) {
  std::mt19937 random(8);
  const auto profile = Profile::fit(measured(25, 5e-6, random), 5e-6);
  EXPECT_TRUE(profile->covers(0.033));
  EXPECT_FALSE(profile->covers(0.036));
  Mirror<double> mirror;
  mirror.kind = MirrorKind::profile;
  mirror.profile = profile;
  EXPECT_TRUE(meet(mirror, Vec3<double>{0.0, 0.0, -0.06}, Vec3<double>{0.3, 0.1, 1.0}));
  EXPECT_FALSE(meet(mirror, Vec3<double>{0.0, 0.0, -0.06}, Vec3<double>{0.9, 0.1, 1.0}));
}

}  // namespace
}  // namespace rondel::optics
