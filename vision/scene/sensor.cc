#include <algorithm>
#include <array>
#include <cassert>
#include <cmath>
#include <opencv2/imgproc.hpp>
#include <vector>

#include "vision/scene/light_colour.h"
#include "vision/scene/noise.h"
#include "vision/scene/render.h"

namespace rondel::scene {
namespace {

/// Sensitivity of the raw channels, B, G, R, before white balance.
constexpr std::array<double, 3> kSensitivity = {0.62, 1.0, 0.70};
constexpr double kScale = 1023.0;  // ten bits

/// Electrons counted where `mean` are expected, with the amplifier's noise.
double counted(double mean, double read_noise, std::uint64_t seed, std::uint64_t index) {
  const auto [a, b] = normals(seed, index);
  if (mean < 30.0) {  // Poisson by inversion: the normal shape is wrong for few
    const double aim = uniform(seed ^ 0x5851F42D4C957F2DULL, index);
    double share = std::exp(-mean);
    double below = share;
    int n = 0;
    while (aim > below && n < 200) {
      ++n;
      share *= mean / n;
      below += share;
    }
    return n + read_noise * b;
  }
  return mean + std::sqrt(mean) * a + read_noise * b;
}

int mirrored_index(int k, int size) {
  if (k < 0) return -k;
  if (k >= size) return 2 * (size - 1) - k;
  return k;
}

/// Which channel (0 B, 1 G, 2 R) the RGGB mosaic has at (u, v).
int mosaic_channel(int u, int v) {
  if (v % 2 == 0) return u % 2 == 0 ? 2 : 1;
  return u % 2 == 0 ? 1 : 0;
}

/// Linear demosaicing with gradient correction (Malvar, He and Cutler 2004).
cv::Mat demosaic(const cv::Mat& raw) {
  const int width = raw.cols;
  const int height = raw.rows;
  cv::Mat out(height, width, CV_32FC3);
  const auto at = [&](int u, int v) {
    return raw.ptr<float>(mirrored_index(v, height))[mirrored_index(u, width)];
  };
  for (int v = 0; v < height; ++v) {
    auto* row = out.ptr<cv::Vec3f>(v);
    for (int u = 0; u < width; ++u) {
      const float c = at(u, v);
      const float near_h = at(u - 1, v) + at(u + 1, v);
      const float near_v = at(u, v - 1) + at(u, v + 1);
      const float far_h = at(u - 2, v) + at(u + 2, v);
      const float far_v = at(u, v - 2) + at(u, v + 2);
      const float corners =
          at(u - 1, v - 1) + at(u + 1, v - 1) + at(u - 1, v + 1) + at(u + 1, v + 1);
      const int own = mosaic_channel(u, v);
      cv::Vec3f value;
      value[own] = c;
      if (own == 1) {
        const float along_h = 0.125F * (5.0F * c + 4.0F * near_h - corners - far_h + 0.5F * far_v);
        const float along_v = 0.125F * (5.0F * c + 4.0F * near_v - corners - far_v + 0.5F * far_h);
        const int beside = v % 2 == 0 ? 2 : 0;
        value[beside] = along_h;
        value[2 - beside] = along_v;
      } else {
        value[1] = 0.125F * (4.0F * c + 2.0F * (near_h + near_v) - far_h - far_v);
        value[2 - own] = 0.125F * (6.0F * c + 2.0F * corners - 1.5F * (far_h + far_v));
      }
      row[u] = value;
    }
  }
  return out;
}

/// sRGB curve as a table over linear 0..1.
const std::vector<unsigned char>& curve() {
  static const std::vector<unsigned char> table = [] {
    std::vector<unsigned char> t(65536);
    for (std::size_t k = 0; k < t.size(); ++k) {
      const double coded = srgb_from_linear(static_cast<double>(k) / 65535.0);
      t[k] = static_cast<unsigned char>(std::lround(255.0 * coded));
    }
    return t;
  }();
  return table;
}

}  // namespace

cv::Mat expose(const cv::Mat& linear_bgr,
               const Sensor& sensor,
               const Light& light,
               std::uint64_t noise_seed) {
  assert(linear_bgr.type() == CV_32FC3);
  const int width = linear_bgr.cols;
  const int height = linear_bgr.rows;
  cv::Mat image = linear_bgr.clone();
  // Lamps are far brighter than full scale; the lens scatters a little of that everywhere.
  if (sensor.glare > 0.0) {
    cv::Mat small;
    cv::Mat veil;
    cv::resize(cv::min(image, 40.0), small, {}, 0.25, 0.25, cv::INTER_AREA);
    cv::GaussianBlur(small, small, {}, 0.03 * width, 0.0, cv::BORDER_REPLICATE);
    cv::resize(small, veil, image.size(), 0.0, 0.0, cv::INTER_LINEAR);
    image = (1.0 - sensor.glare) * image + sensor.glare * veil;
  }
  if (sensor.defocus_px > 0.0) {
    // Full scale times a few: a lamp's disc keeps its size.
    image = cv::min(image, 4.0);
    cv::GaussianBlur(image, image, {}, sensor.defocus_px, 0.0, cv::BORDER_REPLICATE);
  }
  const double cu = 0.5 * (width - 1);
  const double cv0 = 0.5 * (height - 1);
  const double corner2 = cu * cu + cv0 * cv0;
  const Vec3 white = light_colour(light.white_kelvin);
  const std::array<double, 3> balance = {light.white_error_blue * white.y / std::max(0.05, white.z),
                                         1.0,
                                         light.white_error_red * white.y / std::max(0.05, white.x)};
  const bool noisy = sensor.full_well_e > 0.0;
  // Raw values: sensor response, clipped at full well, ten bits.
  const auto raw_value = [&](double value, int channel, std::uint64_t index) {
    double raw = kSensitivity[static_cast<std::size_t>(channel)] * value;
    if (noisy) {
      raw = counted(raw * sensor.full_well_e, sensor.read_noise_e, noise_seed, index) /
            sensor.full_well_e;
      raw = std::round(raw * kScale) / kScale;
    }
    return static_cast<float>(std::min(raw, 1.0));
  };
  cv::Mat raw_bgr;
  if (sensor.bayer) {
    cv::Mat raw(height, width, CV_32F);
    for (int v = 0; v < height; ++v) {
      const auto* in = image.ptr<cv::Vec3f>(v);
      auto* out = raw.ptr<float>(v);
      for (int u = 0; u < width; ++u) {
        const double off2 = (u - cu) * (u - cu) + (v - cv0) * (v - cv0);
        const double fall = 1.0 - sensor.vignetting * off2 / corner2;
        const int channel = mosaic_channel(u, v);
        out[u] = raw_value(fall * static_cast<double>(in[u][channel]),
                           channel,
                           static_cast<std::uint64_t>(v) * static_cast<std::uint64_t>(width) +
                               static_cast<std::uint64_t>(u));
        // Gains before demosaicing, so that grey has equal channels there.
        out[u] = std::min(1.0F,
                          static_cast<float>(static_cast<double>(out[u]) *
                                             balance[static_cast<std::size_t>(channel)] /
                                             kSensitivity[static_cast<std::size_t>(channel)]));
      }
    }
    raw_bgr = demosaic(raw);
  } else {
    raw_bgr = cv::Mat(height, width, CV_32FC3);
    for (int v = 0; v < height; ++v) {
      const auto* in = image.ptr<cv::Vec3f>(v);
      auto* out = raw_bgr.ptr<cv::Vec3f>(v);
      for (int u = 0; u < width; ++u) {
        const double off2 = (u - cu) * (u - cu) + (v - cv0) * (v - cv0);
        const double fall = 1.0 - sensor.vignetting * off2 / corner2;
        for (int channel = 0; channel < 3; ++channel) {
          const auto index = (static_cast<std::uint64_t>(v) * static_cast<std::uint64_t>(width) +
                              static_cast<std::uint64_t>(u)) *
                                 3U +
                             static_cast<std::uint64_t>(channel);
          const float raw = raw_value(fall * static_cast<double>(in[u][channel]), channel, index);
          out[u][channel] = static_cast<float>(static_cast<double>(raw) *
                                               balance[static_cast<std::size_t>(channel)] /
                                               kSensitivity[static_cast<std::size_t>(channel)]);
        }
      }
    }
  }
  const std::vector<unsigned char>& table = curve();
  cv::Mat bgr(height, width, CV_8UC3);
  for (int v = 0; v < height; ++v) {
    const auto* in = raw_bgr.ptr<cv::Vec3f>(v);
    auto* out = bgr.ptr<cv::Vec3b>(v);
    for (int u = 0; u < width; ++u) {
      for (int channel = 0; channel < 3; ++channel) {
        const float value = std::clamp(in[u][channel], 0.0F, 1.0F);
        out[u][channel] = table[static_cast<std::size_t>(std::lround(value * 65535.0F))];
      }
      if (sensor.rgb565) {
        const auto widened = [](unsigned char value, unsigned bits) {
          const unsigned kept = value >> (8U - bits);
          return static_cast<unsigned char>((kept << (8U - bits)) | (kept >> (2U * bits - 8U)));
        };
        out[u] = {widened(out[u][0], 5), widened(out[u][1], 6), widened(out[u][2], 5)};
      }
    }
  }
  return bgr;
}

}  // namespace rondel::scene
