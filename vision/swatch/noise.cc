#include "vision/swatch/noise.h"

#include <algorithm>
#include <array>
#include <cmath>

namespace rondel::vision {
namespace {

constexpr std::size_t kBins = 12;
constexpr std::size_t kLeastPixels = 200;

struct Bin {
  std::vector<float> residuals;
  double light = 0.0;
};

/// Line through (light, variance), weighted by pixels over variance squared, neither part negative.
void fit(const std::array<Bin, kBins>& bins, double& read, double& shot) {
  double sw = 0.0;
  double sx = 0.0;
  double sy = 0.0;
  double sxx = 0.0;
  double sxy = 0.0;
  for (const Bin& bin : bins) {
    if (bin.residuals.size() < kLeastPixels) continue;
    std::vector<float> sorted = bin.residuals;
    const auto middle = sorted.begin() + static_cast<std::ptrdiff_t>(sorted.size() / 2);
    std::nth_element(sorted.begin(), middle, sorted.end());
    const double sd = 1.4826 * static_cast<double>(*middle);  // of a normal distribution
    const double variance = std::max(sd * sd, 1e-9);
    const auto n = static_cast<double>(sorted.size());
    const double x = bin.light / n;
    const double w = n / (variance * variance);
    sw += w;
    sx += w * x;
    sy += w * variance;
    sxx += w * x * x;
    sxy += w * x * variance;
  }
  if (sw == 0.0) return;
  const double spread = sw * sxx - sx * sx;
  shot = spread > 1e-12 * sw * sxx ? std::max(0.0, (sw * sxy - sx * sy) / spread) : 0.0;
  read = (sy - shot * sx) / sw;
  if (read >= 0.0) return;
  read = 0.0;
  shot = sxy / sxx;
}

}  // namespace

colour::SensorNoise noise_of(const std::vector<cv::Mat>& frames, const cv::Mat& mask) {
  std::array<float, 256> linear{};
  for (std::size_t k = 0; k < linear.size(); ++k) {
    linear[k] = static_cast<float>(colour::linear_from_srgb(static_cast<double>(k) / 255.0));
  }
  colour::SensorNoise noise;
  for (std::size_t channel = 0; channel < 3; ++channel) {
    std::array<Bin, kBins> bins;
    const int c = 2 - static_cast<int>(channel);  // images are B, G, R
    for (const cv::Mat& frame : frames) {
      for (int v = 1; v + 1 < frame.rows; ++v) {
        for (int u = 1; u + 1 < frame.cols; ++u) {
          if (mask.at<unsigned char>(v, u) == 0) continue;
          const auto at = [&](int du, int dv) {
            return linear[frame.at<cv::Vec3b>(v + dv, u + du)[c]];
          };
          const float corners = at(-1, -1) + at(1, -1) + at(-1, 1) + at(1, 1);
          const float sides = at(-1, 0) + at(1, 0) + at(0, -1) + at(0, 1);
          const float here = at(0, 0);
          // Clipped pixels show no noise.
          if (here > 0.95F || here < 1e-4F) continue;
          const float residual = std::abs(corners - 2.0F * sides + 4.0F * here) / 6.0F;
          const float light = (here + sides + corners) / 9.0F;
          const auto bin = static_cast<std::size_t>(std::sqrt(std::min(light, 0.999F)) *
                                                    static_cast<float>(kBins));
          bins[bin].residuals.push_back(residual);
          bins[bin].light += static_cast<double>(light);
        }
      }
    }
    fit(bins, noise.read[channel], noise.shot[channel]);
  }
  return noise;
}

}  // namespace rondel::vision
