#pragma once

#include <array>
#include <string>
#include <vector>

#include "calib/colour/choose.h"

namespace rondel::colour {

/// How densely pixels lie in the hue-saturation and the saturation-value plane: square roots of
/// counts over the largest, 0..1, so that thin tails are seen. Rows run upwards.
struct Planes {
  static constexpr int kHueCells = 45;                         // 4 levels
  static constexpr int kByteCells = 32;                        // 8 levels
  std::array<std::array<float, kHueCells>, kByteCells> hs{};   ///< [s][h]
  std::array<std::array<float, kByteCells>, kByteCells> sv{};  ///< [v][s]
};
[[nodiscard]] Planes planes_of(const std::vector<const RgbCounts*>& pixels);

/// A set's worst recall over the lights for exposure and colour temperature changed together.
struct EnvelopeMap {
  std::vector<double> stops;                ///< columns
  std::vector<double> kelvin;               ///< rows
  std::vector<std::vector<double>> recall;  ///< [kelvin][stops]
};
/// `object` is the index into LightSamples::objects.
[[nodiscard]] EnvelopeMap envelope_map(const std::vector<LightSamples>& samples,
                                       std::size_t object,
                                       const ThresholdSet& set,
                                       const ChooseOptions& options);

}  // namespace rondel::colour
