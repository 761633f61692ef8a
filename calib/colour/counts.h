#pragma once

#include <cstdint>
#include <span>
#include <vector>

#include "calib/colour/hsv.h"
#include "calib/colour/lights.h"

namespace rondel::colour {

/// How many pixels have each colour. Colours are distinct and in a fixed order, so that the same
/// pixels in any order give the same counts.
struct RgbCounts {
  struct Entry {
    Rgb colour;
    std::uint32_t count = 0;
  };
  std::vector<Entry> entries;
  [[nodiscard]] std::uint64_t total() const;
};

/// The same over HSV.
struct HsvCounts {
  struct Entry {
    Hsv colour;
    std::uint32_t count = 0;
  };
  std::vector<Entry> entries;
  [[nodiscard]] std::uint64_t total() const;
};

/// Counts pixels as they come. Memory 64 MiB whatever the number of pixels.
class RgbCounter {
 public:
  RgbCounter();
  void add(Rgb p) { ++slots_[key(p)]; }
  void add(const RgbCounts& counts);
  /// The counts so far; starts again from nothing.
  [[nodiscard]] RgbCounts take();

 private:
  static std::size_t key(Rgb p) {
    return (static_cast<std::size_t>(p.r) << 16U) | (static_cast<std::size_t>(p.g) << 8U) | p.b;
  }
  std::vector<std::uint32_t> slots_;
};

/// Sums counts after a change of light.
class HsvCounter {
 public:
  HsvCounter();
  void add(const RgbCounts& counts, const ColourShift& shift);
  void add(const HsvCounts& counts);
  [[nodiscard]] HsvCounts take();

 private:
  std::vector<std::uint32_t> slots_;
};

/// `counts` after a change of light. Where that adds noise, a colour's pixels are shared out over
/// up to kNoiseDraws results.
inline constexpr std::uint32_t kNoiseDraws = 8;
[[nodiscard]] HsvCounts shifted(const RgbCounts& counts, const ColourShift& shift);

/// Every `n`-th colour of `counts`, so that at most `most` are left; their counts are made to stand
/// for the rest.
[[nodiscard]] RgbCounts thinned(const RgbCounts& counts, std::size_t most);

/// Pixels of `counts` that are in the set.
[[nodiscard]] std::uint64_t count_in(const HsvCounts& counts, const ThresholdSet& set);

}  // namespace rondel::colour
