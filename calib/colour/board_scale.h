#pragma once

#include <array>
#include <cstdint>
#include <span>
#include <string>

#include "calib/colour/hsv.h"
#include "calib/colour/threshold_set.h"
#include "calib/venue/spec.h"

namespace rondel::colour {

/// A box in a board's scale, all ends inclusive; h[0] > h[1] passes 0.
///   opencv           h 0-179, s and v 0-255
///   full_byte        h 0-255 (256 steps to the circle), s and v 0-255
///   degrees_percent  h 0-359 degrees, s and v 0-100 percent
struct ScaledBox {
  std::array<int, 2> h{};
  std::array<int, 2> s{};
  std::array<int, 2> v{};
};

/// `box` rounded outward: whatever colour is in the box is in the scaled one too, when the board
/// works out hue, saturation and value exactly and rounds to the nearest step of its scale.
[[nodiscard]] ScaledBox scaled(const HsvBox& box, HsvScale scale);

/// object,box,h_low,h_high,s_low,s_high,v_low,v_high in the board's scale, a row a box.
[[nodiscard]] std::string sets_csv(std::span<const ThresholdSet> sets, HsvScale scale);

/// A box made ready for boards without division: products are compared, the quotients never formed.
struct IntegerBox {
  std::array<std::int32_t, 2> h{};  ///< bounds on 4096 times the hue, 0 .. 180 * 4096
  bool wraps = false;               ///< outside instead of inside the bounds
  bool any_hue = false;
  std::array<std::int32_t, 2> s{};  ///< bounds on 4096 times the saturation
  std::array<int, 2> v{};
};
[[nodiscard]] IntegerBox integer_box(const HsvBox& box);

/// Whether `p` is in the box: the same answer as box.contains(to_hsv(p)) for every colour, with
/// additions, multiplications, comparisons and two tables of 256 reciprocals only.
[[nodiscard]] bool contains(const IntegerBox& box, Rgb p);

}  // namespace rondel::colour
