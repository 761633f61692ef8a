#pragma once

#include <array>
#include <cstdint>

#include "calib/colour/threshold_set.h"

namespace rondel::colour {

/// One pixel's colour, 8 bits a channel, sRGB coded.
struct Rgb {
  std::uint8_t r = 0, g = 0, b = 0;
  friend constexpr bool operator==(Rgb, Rgb) = default;
};

namespace detail {

/// round(numerator * 4096 / i), as 8-bit HSV is defined by OpenCV: 12 bits of fraction.
constexpr std::array<int, 256> reciprocals(int numerator, int divisor) {
  std::array<int, 256> table{};
  for (int i = 1; i < 256; ++i) {
    const int below = divisor * i;
    table[static_cast<std::size_t>(i)] = (2 * (numerator << 12) + below) / (2 * below);
  }
  return table;
}
inline constexpr std::array<int, 256> kSaturationOver = reciprocals(255, 1);
inline constexpr std::array<int, 256> kHueOver = reciprocals(180, 6);

}  // namespace detail

/// HSV hexcone (Smith 1978) in OpenCV's 8-bit scale: bit for bit what cv::cvtColor(COLOR_BGR2HSV)
/// gives. Greys have h = 0, black has s = 0.
[[nodiscard]] constexpr Hsv to_hsv(Rgb p) {
  const int r = p.r;
  const int g = p.g;
  const int b = p.b;
  const int high = r > g ? (r > b ? r : b) : (g > b ? g : b);
  const int low = r < g ? (r < b ? r : b) : (g < b ? g : b);
  const int chroma = high - low;
  const int s = (chroma * detail::kSaturationOver[static_cast<std::size_t>(high)] + 2048) >> 12;
  int turn = 0;  // sixths of the circle, times chroma
  if (high == r) {
    turn = g - b;
  } else if (high == g) {
    turn = b - r + 2 * chroma;
  } else {
    turn = r - g + 4 * chroma;
  }
  int h = (turn * detail::kHueOver[static_cast<std::size_t>(chroma)] + 2048) >> 12;
  if (h < 0) h += 180;
  return {
      static_cast<std::uint8_t>(h), static_cast<std::uint8_t>(s), static_cast<std::uint8_t>(high)};
}

/// The 8-bit colour that an RGB565 value stands for: each channel's bits repeated below themselves.
[[nodiscard]] constexpr Rgb from_rgb565(unsigned value) {
  const unsigned r = (value >> 11U) & 31U;
  const unsigned g = (value >> 5U) & 63U;
  const unsigned b = value & 31U;
  return {static_cast<std::uint8_t>((r << 3U) | (r >> 2U)),
          static_cast<std::uint8_t>((g << 2U) | (g >> 4U)),
          static_cast<std::uint8_t>((b << 3U) | (b >> 2U))};
}

/// Each channel's top bits.
[[nodiscard]] constexpr unsigned to_rgb565(Rgb p) {
  return (static_cast<unsigned>(p.r >> 3U) << 11U) | (static_cast<unsigned>(p.g >> 2U) << 5U) |
         static_cast<unsigned>(p.b >> 3U);
}

}  // namespace rondel::colour
