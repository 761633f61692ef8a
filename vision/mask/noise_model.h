#pragma once

#include <span>

namespace rondel::vision {

/// Photon transfer (Janesick et al., 1985): variance of a pixel's level against its level, both in
/// grey levels. variance = read_variance + gain * level, neither below zero.
struct NoiseModel {
  double read_variance = 1.0;
  double gain = 0.0;
  [[nodiscard]] double variance(double level) const {
    const double v = read_variance + gain * level;
    return v > kLeastVariance ? v : kLeastVariance;
  }
  /// Rounding to whole levels alone leaves a twelfth.
  static constexpr double kLeastVariance = 1.0 / 12.0;
};

/// Weighted least squares through (level, variance) pairs that come from `degrees` degrees of
/// freedom each: the spread of a variance is proportional to itself, so weights follow the fit.
/// At least two pairs; a slope or offset that would be negative becomes zero.
struct VarianceSample {
  double level = 0.0;
  double variance = 0.0;
  double degrees = 1.0;
};
[[nodiscard]] NoiseModel fit_noise(std::span<const VarianceSample> samples);

}  // namespace rondel::vision
