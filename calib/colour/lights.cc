#include "calib/colour/lights.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>
#include <numbers>

namespace rondel::colour {

double linear_from_srgb(double coded) {
  return coded <= 0.04045 ? coded / 12.92 : std::pow((coded + 0.055) / 1.055, 2.4);
}

double srgb_from_linear(double linear) {
  return linear <= 0.0031308 ? 12.92 * linear : 1.055 * std::pow(linear, 1.0 / 2.4) - 0.055;
}

Chromaticity planckian(double kelvin) {
  const double t = 1e3 / std::clamp(kelvin, 1667.0, 25000.0);
  const double x = t >= 0.25 ? ((-0.2661239 * t - 0.2343589) * t + 0.8776956) * t + 0.179910
                             : ((-3.0258469 * t + 2.1070379) * t + 0.2226347) * t + 0.24039;
  if (t > 1e3 / 2222.0) {
    return {x, ((-1.1063814 * x - 1.34811020) * x + 2.18555832) * x - 0.20219683};
  }
  if (t >= 0.25) return {x, ((-0.9549476 * x - 1.37418593) * x + 2.09137015) * x - 0.16748867};
  return {x, ((3.0817580 * x - 5.8733867) * x + 3.75112997) * x - 0.37001483};
}

Chromaticity daylight(double kelvin) {
  const double t = 1e3 / std::clamp(kelvin, 4000.0, 25000.0);
  const double x = kelvin <= 7000.0 ? ((-4.6070 * t + 2.9678) * t + 0.09911) * t + 0.244063
                                    : ((-2.0064 * t + 1.9018) * t + 0.24748) * t + 0.23704;
  return {x, (-3.0 * x + 2.87) * x - 0.275};
}

Chromaticity light_at(double kelvin) {
  return kelvin < 4000.0 ? planckian(kelvin) : daylight(kelvin);
}

std::array<double, 3> linear_rgb(Chromaticity light) {
  const double x = light.x / light.y;
  const double z = (1.0 - light.x - light.y) / light.y;
  // IEC 61966-2-1.
  return {3.2406 * x - 1.5372 - 0.4986 * z,
          -0.9689 * x + 1.8758 + 0.0415 * z,
          0.0557 * x - 0.2040 + 1.0570 * z};
}

Gains camera_gains(Chromaticity light, Chromaticity balanced_for) {
  const auto seen = linear_rgb(light);
  const auto white = linear_rgb(balanced_for);
  const auto gain = [&](std::size_t channel) {
    return std::max(0.01, seen[channel] / seen[1]) / std::max(0.01, white[channel] / white[1]);
  };
  return {gain(0), gain(2)};
}

LightChange change_of_light(double stops, double from_kelvin, double to_kelvin) {
  return {stops, to_kelvin, camera_gains(light_at(to_kelvin), light_at(from_kelvin))};
}

double middle_kelvin(const LightingSpec& spec) {
  return 2.0 / (1.0 / spec.kelvin[0] + 1.0 / spec.kelvin[1]);
}

std::vector<LightChange> changes_of(const LightingSpec& spec) {
  // Equal steps over [low, high] with 0 among them, which is where the frames are.
  const auto grid = [](double low, double high, double step) {
    std::vector<double> values{0.0};
    for (const double end : {low, high}) {
      const int count = static_cast<int>(std::ceil(std::abs(end) / step - 1e-9));
      for (int k = 1; k <= count; ++k) values.push_back(end * k / count);
    }
    std::sort(values.begin() + 1, values.end());
    return values;
  };
  const double middle = middle_kelvin(spec);
  std::vector<LightChange> colours{{}};
  if (spec.auto_white_balance) {
    for (const double red : {1.0 / kBalanceError, kBalanceError}) {
      for (const double blue : {1.0 / kBalanceError, kBalanceError}) {
        colours.push_back({0.0, 0.0, {red, blue}});
      }
    }
  } else {
    const auto reciprocals =
        grid(1e6 / spec.kelvin[1] - 1e6 / middle, 1e6 / spec.kelvin[0] - 1e6 / middle, 25.0);
    for (std::size_t k = 1; k < reciprocals.size(); ++k) {
      colours.push_back(change_of_light(0.0, middle, 1e6 / (1e6 / middle + reciprocals[k])));
    }
  }
  std::vector<LightChange> changes;
  for (LightChange change : colours) {
    for (const double stops :
         grid(std::min(0.0, spec.stops[0]), std::max(0.0, spec.stops[1]), 0.5)) {
      change.stops = stops;
      changes.push_back(change);
    }
  }
  return changes;
}

std::string text_of(const LightChange& change) {
  std::string text;
  if (change.stops != 0.0) text = fmt::format("{:+.2g} stop", change.stops);
  if (change.kelvin > 0.0) {
    text += fmt::format("{}{:.0f} K", text.empty() ? "" : ", ", change.kelvin);
  } else if (change.gains.red != 1.0 || change.gains.blue != 1.0) {
    text += fmt::format("{}red {:+.0f} %, blue {:+.0f} %",
                        text.empty() ? "" : ", ",
                        100.0 * (change.gains.red - 1.0),
                        100.0 * (change.gains.blue - 1.0));
  }
  return text.empty() ? "as captured" : text;
}

namespace {

/// Linear light 0..1 to 8 bits, in steps fine enough for the curve's steep foot.
constexpr std::size_t kCurveSteps = 16384;
const std::array<std::uint8_t, kCurveSteps + 1>& curve() {
  static const auto table = [] {
    std::array<std::uint8_t, kCurveSteps + 1> t{};
    for (std::size_t k = 0; k < t.size(); ++k) {
      const double linear = static_cast<double>(k) / static_cast<double>(kCurveSteps);
      t[k] = static_cast<std::uint8_t>(std::lround(255.0 * srgb_from_linear(linear)));
    }
    return t;
  }();
  return table;
}

std::uint32_t scrambled(std::uint32_t x) {
  x ^= x >> 16U;
  x *= 0x7FEB352DU;
  x ^= x >> 15U;
  x *= 0x846CA68BU;
  return x ^ (x >> 16U);
}

/// Standard normal numbers (Box and Muller 1958), picked from by hashes.
constexpr std::size_t kNormals = 4096;
const std::array<float, kNormals>& normals() {
  static const auto table = [] {
    std::array<float, kNormals> t{};
    for (std::uint32_t k = 0; k < kNormals / 2; ++k) {
      const double a = (scrambled(2 * k + 1) + 0.5) / 4294967296.0;
      const double b = (scrambled(2 * k + 2) + 0.5) / 4294967296.0;
      const double radius = std::sqrt(-2.0 * std::log(a));
      t[2 * k] = static_cast<float>(radius * std::cos(2.0 * std::numbers::pi * b));
      t[2 * k + 1] = static_cast<float>(radius * std::sin(2.0 * std::numbers::pi * b));
    }
    return t;
  }();
  return table;
}

std::uint8_t as_rgb565(std::uint8_t value, std::size_t channel) {
  const unsigned bits = channel == 1 ? 6 : 5;
  const unsigned kept = value >> (8U - bits);
  return static_cast<std::uint8_t>((kept << (8U - bits)) | (kept >> (2U * bits - 8U)));
}

}  // namespace

ColourShift::ColourShift(const LightChange& change, bool rgb565, const SensorNoise& noise)
    : rgb565_{rgb565} {
  const double exposure = std::exp2(change.stops);
  const std::array<double, 3> gains = {change.gains.red, 1.0, change.gains.blue};
  for (std::size_t c = 0; c < 3; ++c) {
    const double gain = exposure * gains[c];
    for (std::size_t k = 0; k < 256; ++k) {
      const double before = linear_from_srgb(static_cast<double>(k) / 255.0);
      const double after = gain * before;
      plain_[c][k] = coded(after, c);
      linear_[c][k] = static_cast<float>(after);
      const double wanted = noise.read[c] + noise.shot[c] * after;
      const double there = gain * gain * (noise.read[c] + noise.shot[c] * before);
      sd_[c][k] = static_cast<float>(std::sqrt(std::max(0.0, wanted - there)));
      noisy_ |= sd_[c][k] > 0.0F && k > 0;
    }
  }
}

std::uint8_t ColourShift::coded(double linear, std::size_t channel) const {
  const double clipped = std::clamp(linear, 0.0, 1.0);
  const auto level = static_cast<std::uint8_t>(std::lround(255.0 * srgb_from_linear(clipped)));
  return rgb565_ ? as_rgb565(level, channel) : level;
}

Rgb ColourShift::with_noise(Rgb p, std::uint32_t draw) const {
  const std::array<std::uint8_t, 3> in = {p.r, p.g, p.b};
  std::array<std::uint8_t, 3> out{};
  const std::uint32_t colour =
      (std::uint32_t{p.r} << 16U) | (std::uint32_t{p.g} << 8U) | std::uint32_t{p.b};
  std::uint32_t random = scrambled(colour ^ (draw * 0x9E3779B9U));
  for (std::size_t c = 0; c < 3; ++c) {
    const float linear = linear_[c][in[c]] + sd_[c][in[c]] * normals()[random % kNormals];
    random = scrambled(random + 1U);
    const float step = std::clamp(linear, 0.0F, 1.0F) * static_cast<float>(kCurveSteps);
    const std::uint8_t level = curve()[static_cast<std::size_t>(step + 0.5F)];
    out[c] = rgb565_ ? as_rgb565(level, c) : level;
  }
  return {out[0], out[1], out[2]};
}

}  // namespace rondel::colour
