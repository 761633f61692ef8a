#include "vision/mask/noise_model.h"

#include <gtest/gtest.h>

#include <random>
#include <vector>

namespace rondel::vision {
namespace {

/// Photon counts are Poisson: of a level L at gain g they are L / g counts, variance g L, and a
/// normal read noise adds its own.
TEST(NoiseModel, FindsGainAndReadNoiseOfAPoissonSample) {
  constexpr double kGain = 0.08;
  constexpr double kRead = 1.7;
  constexpr int kSamples = 20000;
  std::mt19937 random(11);
  std::normal_distribution<double> read(0.0, kRead);
  std::vector<VarianceSample> samples;
  for (double level = 10.0; level < 250.0; level += 15.0) {
    std::poisson_distribution<int> photons(level / kGain);
    double sum = 0.0;
    double squares = 0.0;
    for (int k = 0; k < kSamples; ++k) {
      const double x = kGain * photons(random) + read(random);
      sum += x;
      squares += x * x;
    }
    const double mean = sum / kSamples;
    samples.push_back(
        {mean, (squares - kSamples * mean * mean) / (kSamples - 1.0), kSamples - 1.0});
  }
  const NoiseModel model = fit_noise(samples);
  // A variance is known to sqrt(2 / 20000) = 1 %; sixteen of them over this span give the slope to
  // 0.5 % and the offset to 2 %; four deviations.
  EXPECT_NEAR(model.gain, kGain, 0.02 * kGain);
  EXPECT_NEAR(model.read_variance, kRead * kRead, 0.08 * kRead * kRead);
}

TEST(NoiseModel, NeverGoesBelowRounding) {
  const std::vector<VarianceSample> none = {{20.0, 0.0, 100.0}, {200.0, 0.0, 100.0}};
  EXPECT_GE(fit_noise(none).variance(0.0), 1.0 / 12.0);
}

TEST(NoiseModel, ANegativeSlopeIsNoSlope) {
  const std::vector<VarianceSample> falling = {{20.0, 9.0, 100.0}, {200.0, 5.0, 100.0}};
  const NoiseModel model = fit_noise(falling);
  EXPECT_EQ(model.gain, 0.0);
  EXPECT_GE(model.read_variance, 5.0);
  EXPECT_LE(model.read_variance, 9.0);
}

}  // namespace
}  // namespace rondel::vision
