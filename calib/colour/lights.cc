#include "calib/colour/lights.h"

#include <fmt/core.h>

#include <algorithm>
#include <cmath>

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

ColourShift::ColourShift(const LightChange& change, bool rgb565) {
  const double exposure = std::exp2(change.stops);
  const auto fill = [&](std::array<std::uint8_t, 256>& table, double gain, unsigned bits) {
    for (std::size_t k = 0; k < table.size(); ++k) {
      const double linear = gain * exposure * linear_from_srgb(static_cast<double>(k) / 255.0);
      const double coded = 255.0 * srgb_from_linear(std::min(1.0, linear));
      auto value = static_cast<unsigned>(std::lround(coded));
      if (rgb565) {
        value >>= 8U - bits;
        value = (value << (8U - bits)) | (value >> (2U * bits - 8U));
      }
      table[k] = static_cast<std::uint8_t>(value);
    }
  };
  fill(red_, change.gains.red, 5);
  fill(green_, 1.0, 6);
  fill(blue_, change.gains.blue, 5);
}

}  // namespace rondel::colour
