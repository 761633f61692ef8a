#include "vision/scene/light_colour.h"

#include <algorithm>
#include <cmath>

#include "vision/scene/scene.h"

namespace rondel::scene {
namespace {

struct Chromaticity {
  double x = 0.0;
  double y = 0.0;
};

/// Kang et al. 2002, 1667-25000 K.
Chromaticity planckian(double kelvin) {
  const double t = 1e3 / kelvin;
  const double x = kelvin < 4000.0
                       ? -0.2661239 * t * t * t - 0.2343589 * t * t + 0.8776956 * t + 0.179910
                       : -3.0258469 * t * t * t + 2.1070379 * t * t + 0.2226347 * t + 0.24039;
  const double xx = x * x;
  if (kelvin < 2222.0) {
    return {x, -1.1063814 * xx * x - 1.34811020 * xx + 2.18555832 * x - 0.20219683};
  }
  if (kelvin < 4000.0) {
    return {x, -0.9549476 * xx * x - 1.37418593 * xx + 2.09137015 * x - 0.16748867};
  }
  return {x, 3.0817580 * xx * x - 5.8733867 * xx + 3.75112997 * x - 0.37001483};
}

/// CIE daylight, 4000-25000 K.
Chromaticity daylight(double kelvin) {
  const double t = 1e3 / kelvin;
  const double x = kelvin < 7000.0 ? -4.6070 * t * t * t + 2.9678 * t * t + 0.09911 * t + 0.244063
                                   : -2.0064 * t * t * t + 1.9018 * t * t + 0.24748 * t + 0.23704;
  return {x, -3.0 * x * x + 2.870 * x - 0.275};
}

}  // namespace

Vec3 light_colour(double kelvin) {
  const double k = std::clamp(kelvin, 1700.0, 25000.0);
  Chromaticity c = k < 4000.0 ? planckian(k) : daylight(k);
  if (k >= 4000.0 && k < 5500.0) {
    const double w = (k - 4000.0) / 1500.0;
    const Chromaticity p = planckian(k);
    c = {(1.0 - w) * p.x + w * c.x, (1.0 - w) * p.y + w * c.y};
  }
  const double big_x = c.x / c.y;
  const double big_z = (1.0 - c.x - c.y) / c.y;
  // IEC 61966-2-1, XYZ to linear sRGB, luminance 1.
  return {std::max(0.0, 3.2406 * big_x - 1.5372 - 0.4986 * big_z),
          std::max(0.0, -0.9689 * big_x + 1.8758 + 0.0415 * big_z),
          std::max(0.0, 0.0557 * big_x - 0.2040 + 1.0570 * big_z)};
}

double srgb_from_linear(double linear) {
  return linear <= 0.0031308 ? 12.92 * linear : 1.055 * std::pow(linear, 1.0 / 2.4) - 0.055;
}

double linear_from_srgb(double coded) {
  return coded <= 0.04045 ? coded / 12.92 : std::pow((coded + 0.055) / 1.055, 2.4);
}

Vec3 srgb(int red, int green, int blue) {
  return {linear_from_srgb(red / 255.0),
          linear_from_srgb(green / 255.0),
          linear_from_srgb(blue / 255.0)};
}

}  // namespace rondel::scene
