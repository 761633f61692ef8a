#pragma once

#include <cmath>
#include <cstdint>
#include <numbers>
#include <utility>

namespace rondel::scene {

/// A 64-bit mixing function (the finaliser of SplitMix64, Steele et al. 2014): numbers that depend
/// on a counter only, so that any thread can draw any of them.
[[nodiscard]] constexpr std::uint64_t mix(std::uint64_t x) {
  x += 0x9E3779B97F4A7C15ULL;
  x = (x ^ (x >> 30U)) * 0xBF58476D1CE4E5B9ULL;
  x = (x ^ (x >> 27U)) * 0x94D049BB133111EBULL;
  return x ^ (x >> 31U);
}

/// Uniform in (0, 1), the `index`-th of stream `seed`.
[[nodiscard]] constexpr double uniform(std::uint64_t seed, std::uint64_t index) {
  const std::uint64_t bits = mix(mix(seed) ^ (index * 0xD1342543DE82EF95ULL)) >> 11U;
  return (static_cast<double>(bits) + 0.5) * 0x1.0p-53;
}

/// Two independent standard normal numbers, the `index`-th of stream `seed` (Box and Muller 1958).
[[nodiscard]] inline std::pair<double, double> normals(std::uint64_t seed, std::uint64_t index) {
  const double radius = std::sqrt(-2.0 * std::log(uniform(seed, 2 * index)));
  const double angle = 2.0 * std::numbers::pi * uniform(seed, 2 * index + 1);
  return {radius * std::cos(angle), radius * std::sin(angle)};
}

}  // namespace rondel::scene
