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

/// `table` with fewer bits a channel; an entry takes the class with the most weight among those it
/// stands for, the lowest on a tie. `weights`: pixels seen of each RGB565 value, 65536 entries;
/// empty: every value counts the same.
[[nodiscard]] ClassTable coarser(const ClassTable& table,
                                 int bits_r,
                                 int bits_g,
                                 int bits_b,
                                 std::span<const std::uint64_t> weights = {});

/// Share of RGB565 values, by weight, to which the two tables give different classes.
[[nodiscard]] double disagreement(const ClassTable& a,
                                  const ClassTable& b,
                                  std::span<const std::uint64_t> weights = {});

/// The table with the fewest entries whose disagreement with `table` (over RGB565) stays within
/// `most`; among equals the one that disagrees least. From 2 bits a channel up.
[[nodiscard]] ClassTable smallest_class_table(const ClassTable& table,
                                              double most,
                                              std::span<const std::uint64_t> weights = {});

}  // namespace rondel::colour
