#pragma once

#include <array>
#include <cstdint>
#include <string>
#include <vector>

namespace rondel::colour {

/// A pixel in OpenCV's 8-bit HSV scale: h 0-179, s and v 0-255.
struct Hsv {
  std::uint8_t h = 0, s = 0, v = 0;
};

/// A closed arc of hues 0-179, walked upwards; from > to means it passes 0. {0, 179} is the full
/// circle. There is no empty arc.
struct HueArc {
  int from = 0;
  int to = 179;
  [[nodiscard]] constexpr bool contains(int h) const {
    return from <= to ? (from <= h && h <= to) : (h >= from || h <= to);
  }
};

/// One HSV box, all ends inclusive.
struct HsvBox {
  HueArc h;
  std::array<int, 2> s = {0, 255};
  std::array<int, 2> v = {0, 255};
  [[nodiscard]] constexpr bool contains(Hsv p) const {
    return h.contains(p.h) && s[0] <= p.s && p.s <= s[1] && v[0] <= p.v && p.v <= v[1];
  }
};

/// For one object: the union of its boxes.
struct ThresholdSet {
  std::string object;
  std::vector<HsvBox> boxes;
  [[nodiscard]] constexpr bool contains(Hsv p) const {
    for (const HsvBox& box : boxes) {
      if (box.contains(p)) return true;
    }
    return false;
  }
};

}  // namespace rondel::colour
