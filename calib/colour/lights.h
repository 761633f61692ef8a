#pragma once

#include <array>
#include <cstdint>
#include <string>
#include <vector>

#include "calib/colour/hsv.h"
#include "calib/venue/spec.h"

namespace rondel::colour {

/// sRGB transfer curve (IEC 61966-2-1), coded 0..1 to linear 0..1 and back.
[[nodiscard]] double linear_from_srgb(double coded);
[[nodiscard]] double srgb_from_linear(double linear);

/// CIE 1931 chromaticity, 2 degree observer.
struct Chromaticity {
  double x = 0.0;
  double y = 0.0;
};

/// Planckian locus (Kang et al. 2002), 1667-25000 K; outside, the nearest end.
[[nodiscard]] Chromaticity planckian(double kelvin);
/// CIE daylight locus, 4000-25000 K; outside, the nearest end.
[[nodiscard]] Chromaticity daylight(double kelvin);
/// The light of a hall: Planckian below 4000 K, daylight from there on.
[[nodiscard]] Chromaticity light_at(double kelvin);

/// Linear sRGB of a light of luminance 1. Negative where the light is outside sRGB's triangle.
[[nodiscard]] std::array<double, 3> linear_rgb(Chromaticity light);

/// Gains of red and blue in linear light; green's is 1.
struct Gains {
  double red = 1.0;
  double blue = 1.0;
};
/// What a camera balanced for `balanced_for` makes of white under `light`. Gains of lights outside
/// sRGB's triangle stop at 0.01.
[[nodiscard]] Gains camera_gains(Chromaticity light, Chromaticity balanced_for);

/// How a perturbed light differs from the one a frame was made in.
struct LightChange {
  double stops = 0.0;   ///< exposure; positive is brighter
  double kelvin = 0.0;  ///< colour temperature; 0: unchanged
  Gains gains;
};

/// The change from light of `from_kelvin` to `to_kelvin` with exposure changed by `stops`, under a
/// camera whose white balance does not follow.
[[nodiscard]] LightChange change_of_light(double stops, double from_kelvin, double to_kelvin);

/// What an automatic white balance is usually off by, as a factor on red and on blue.
inline constexpr double kBalanceError = 1.06;

/// The changes that `spec` asks for: a grid over stops (steps of at most half a stop), and over
/// colour: without automatic white balance colour temperature (equal steps of at most 25 in
/// reciprocal megakelvin), with it red and blue off by kBalanceError either way. The unchanged
/// light is always among them and comes first. Frames are taken to have been made in the middle of
/// the range, `middle_kelvin`.
[[nodiscard]] std::vector<LightChange> changes_of(const LightingSpec& spec);
[[nodiscard]] double middle_kelvin(const LightingSpec& spec);

/// "as captured", "+1 stop, 5000 K".
[[nodiscard]] std::string text_of(const LightChange& change);

/// A camera's noise, by channel (red, green, blue), in linear light where 1 fills the sensor:
/// variance = read + shot * light. All zero: none is added.
struct SensorNoise {
  std::array<double, 3> read{};
  std::array<double, 3> shot{};
};

/// A change of light done to 8-bit colours: von Kries gains and exposure in linear light, clipped
/// at full scale, coded again in 8 bits. A frame made darker afterwards has less noise than one
/// taken in the dark; where `noise` is known, the difference is added. With `rgb565` the result is
/// what an RGB565 value stands for.
class ColourShift {
 public:
  ColourShift(const LightChange& change, bool rgb565, const SensorNoise& noise = {});
  /// Whether equal colours may come out differently.
  [[nodiscard]] bool noisy() const { return noisy_; }
  /// `draw` picks the noise: the same colour and draw give the same result.
  [[nodiscard]] Rgb operator()(Rgb p, std::uint32_t draw = 0) const {
    if (!noisy_) return {plain_[0][p.r], plain_[1][p.g], plain_[2][p.b]};
    return with_noise(p, draw);
  }

 private:
  [[nodiscard]] Rgb with_noise(Rgb p, std::uint32_t draw) const;
  [[nodiscard]] std::uint8_t coded(double linear, std::size_t channel) const;

  bool rgb565_ = false;
  bool noisy_ = false;
  std::array<std::array<std::uint8_t, 256>, 3> plain_{};
  std::array<std::array<float, 256>, 3> linear_{};
  std::array<std::array<float, 256>, 3> sd_{};
};

}  // namespace rondel::colour
