#include "calib/colour/board_scale.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>

namespace rondel::colour {
namespace {

/// Ends of levels [low, high] (each a level wide, centred) in a scale of `steps` for `levels`,
/// rounded outward.
std::array<int, 2> outward(double low, double high, double levels, double steps) {
  // A board that rounds to the nearest step gives every step that the widened interval touches.
  constexpr double kTiny = 1e-9;
  const double from = (low - 0.5) * steps / levels;
  const double to = (high + 0.5) * steps / levels;
  return {static_cast<int>(std::floor(from + 0.5 - kTiny)),
          static_cast<int>(std::ceil(to - 0.5 + kTiny))};
}

std::array<int, 2> byte_edges(const std::array<int, 2>& edges, HsvScale scale) {
  if (scale != HsvScale::degrees_percent) return edges;
  const std::array<int, 2> out = outward(edges[0], edges[1], 255.0, 100.0);
  return {std::clamp(out[0], 0, 100), std::clamp(out[1], 0, 100)};
}

std::array<int, 2> hue_edges(const HueArc& arc, HsvScale scale) {
  if (scale == HsvScale::opencv) return {arc.from, arc.to};
  const int steps = scale == HsvScale::full_byte ? 256 : 360;
  const int to = arc.from <= arc.to ? arc.to : arc.to + 180;
  // The 8-bit hue is off by a little more than half a level: its reciprocals have 12 bits.
  const std::array<int, 2> out = outward(arc.from - 0.05, to + 0.05, 180.0, steps);
  if (out[1] - out[0] + 1 >= steps) return {0, steps - 1};
  return {(out[0] + steps) % steps, out[1] % steps};
}

}  // namespace

ScaledBox scaled(const HsvBox& box, HsvScale scale) {
  ScaledBox out;
  out.h = hue_edges(box.h, scale);
  out.s = byte_edges(box.s, scale);
  out.v = byte_edges(box.v, scale);
  return out;
}

std::string sets_csv(std::span<const ThresholdSet> sets, HsvScale scale) {
  std::string out = "object,box,h_low,h_high,s_low,s_high,v_low,v_high\n";
  for (const ThresholdSet& set : sets) {
    for (std::size_t k = 0; k < set.boxes.size(); ++k) {
      const ScaledBox box = scaled(set.boxes[k], scale);
      out += fmt::format("{},{},{},{},{},{},{},{}\n",
                         set.object,
                         k + 1,
                         box.h[0],
                         box.h[1],
                         box.s[0],
                         box.s[1],
                         box.v[0],
                         box.v[1]);
    }
  }
  return out;
}

IntegerBox integer_box(const HsvBox& box) {
  IntegerBox out;
  out.any_hue = box.h.from == 0 && box.h.to == 179;
  out.wraps = box.h.from > box.h.to;
  // h >= from and h <= to, with h = (x + 2048) >> 12; where it wraps, not to < h < from.
  const int low = out.wraps ? box.h.to + 1 : box.h.from;
  const int high = out.wraps ? box.h.from - 1 : box.h.to;
  out.h = {low * 4096 - 2048, high * 4096 + 2047};
  out.s = {box.s[0] * 4096 - 2048, box.s[1] * 4096 + 2047};
  out.v = box.v;
  return out;
}

bool contains(const IntegerBox& box, Rgb p) {
  const int r = p.r;
  const int g = p.g;
  const int b = p.b;
  const int high = std::max({r, g, b});
  const int chroma = high - std::min({r, g, b});
  if (high < box.v[0] || high > box.v[1]) return false;
  const int s = chroma * detail::kSaturationOver[static_cast<std::size_t>(high)];
  if (s < box.s[0] || s > box.s[1]) return false;
  if (box.any_hue) return true;
  int turn = r - g + 4 * chroma;
  if (high == r) {
    turn = g - b;
  } else if (high == g) {
    turn = b - r + 2 * chroma;
  }
  int h = turn * detail::kHueOver[static_cast<std::size_t>(chroma)];
  // What rounds to a hue below 0 belongs to the end of the circle.
  if (h < -2048) h += 180 * 4096;
  const bool inside = h >= box.h[0] && h <= box.h[1];
  return inside != box.wraps;
}

}  // namespace rondel::colour
