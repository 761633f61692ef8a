#pragma once

#include <cstdint>
#include <span>
#include <vector>

#include "calib/colour/threshold_set.h"

namespace rondel::colour {

/// What a camera board carries to classify a pixel with one look-up: class 0 is 'none', class k is
/// the k-th object of the venue (1-based). Indexed by the top bits of r, g and b, r highest.
struct ClassTable {
  int bits_r = 5, bits_g = 6, bits_b = 5;
  std::vector<std::uint8_t> classes;  ///< 1 << (bits_r + bits_g + bits_b) entries

  [[nodiscard]] std::uint8_t at(std::uint8_t r, std::uint8_t g, std::uint8_t b) const {
    const unsigned index = (static_cast<unsigned>(r >> (8 - bits_r)) << (bits_g + bits_b)) |
                           (static_cast<unsigned>(g >> (8 - bits_g)) << bits_b) |
                           static_cast<unsigned>(b >> (8 - bits_b));
    return classes[index];
  }
};

/// The table of `sets` (index + 1 is the class) over RGB565. Where sets overlap the first wins.
[[nodiscard]] ClassTable make_class_table(std::span<const ThresholdSet> sets);

}  // namespace rondel::colour
