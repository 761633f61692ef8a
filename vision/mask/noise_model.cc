#include "vision/mask/noise_model.h"

#include <algorithm>
#include <cassert>

namespace rondel::vision {

NoiseModel fit_noise(std::span<const VarianceSample> samples) {
  assert(samples.size() >= 2);
  NoiseModel model;
  model.read_variance = 0.0;
  for (const VarianceSample& s : samples) model.read_variance += s.variance;
  model.read_variance /= static_cast<double>(samples.size());
  model.gain = 0.0;
  for (int round = 0; round < 12; ++round) {
    double w = 0.0;
    double wx = 0.0;
    double wxx = 0.0;
    double wy = 0.0;
    double wxy = 0.0;
    for (const VarianceSample& s : samples) {
      const double v = model.variance(s.level);
      const double weight = s.degrees / (2.0 * v * v);
      w += weight;
      wx += weight * s.level;
      wxx += weight * s.level * s.level;
      wy += weight * s.variance;
      wxy += weight * s.level * s.variance;
    }
    const double determinant = w * wxx - wx * wx;
    double gain = determinant > 1e-12 * w * wxx ? (w * wxy - wx * wy) / determinant : 0.0;
    gain = std::max(0.0, gain);
    double read = (wy - gain * wx) / w;
    if (read < 0.0) {
      read = 0.0;
      gain = wxx > 0.0 ? wxy / wxx : 0.0;
    }
    model.read_variance = read;
    model.gain = gain;
  }
  return model;
}

}  // namespace rondel::vision
