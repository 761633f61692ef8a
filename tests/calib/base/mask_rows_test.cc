#include "calib/base/mask_rows.h"

#include <gtest/gtest.h>

#include <cmath>
#include <random>

#include "calib/base/problem.h"

namespace rondel {
namespace {

std::vector<std::uint8_t> ring_mask(int width, int height, std::mt19937& random) {
  std::uniform_real_distribution<double> draw(0.0, 1.0);
  const double u0 = width * (0.4 + 0.2 * draw(random));
  const double v0 = height * (0.4 + 0.2 * draw(random));
  std::vector<std::uint8_t> mask;
  for (int v = 0; v < height; ++v) {
    for (int u = 0; u < width; ++u) {
      const double r = std::hypot(u - u0, v - v0);
      mask.push_back(r > 0.15 * height && r < 0.45 * height && draw(random) > 0.02 ? 255 : 0);
    }
  }
  return mask;
}

TEST(MaskRows, ComesBackExactlyFromBytes) {
  std::mt19937 random(5);
  for (const int width : {1, 64, 320, 700}) {
    const int height = 48;
    const auto mask = ring_mask(width, height, random);
    const MaskRows rows = rows_of(mask, width);
    EXPECT_EQ(mask_of(rows), mask);
    EXPECT_EQ(unpack_rows(pack_rows(rows), width, height), rows);
  }
}

TEST(MaskRows, ExtremesComeBack) {
  for (const std::uint8_t level : {std::uint8_t{0}, std::uint8_t{255}}) {
    const std::vector<std::uint8_t> mask(300 * 4, level);
    const MaskRows rows = rows_of(mask, 300);
    EXPECT_EQ(mask_of(unpack_rows(pack_rows(rows), 300, 4)), mask);
    // A first row, and three times 'as before'.
    EXPECT_EQ(pack_rows(rows).size(), level == 0 ? 4U : 5U);
  }
}

TEST(MaskRows, RefusesDamage) {
  const std::vector<std::uint8_t> mask(64 * 8, 255);
  std::vector<std::uint8_t> bytes = pack_rows(rows_of(mask, 64));
  EXPECT_THROW(unpack_rows(std::span(bytes).first(bytes.size() - 1), 64, 8), InputError);
  bytes.push_back(0);
  EXPECT_THROW(unpack_rows(bytes, 64, 8), InputError);
  const std::vector<std::uint8_t> beyond = {1, 200};
  EXPECT_THROW(unpack_rows(beyond, 64, 1), InputError);
  const std::vector<std::uint8_t> nothing_before = {255};
  EXPECT_THROW(unpack_rows(nothing_before, 64, 1), InputError);
}

TEST(VisibleRadii, NeverShowsWhatIsHidden) {
  std::mt19937 random(6);
  const auto mask = ring_mask(160, 120, random);
  const VisibleRadii radii = visible_radii(mask, 160, {80.3, 59.6}, 120);
  int shown = 0;
  for (int v = 0; v < 120; ++v) {
    for (int u = 0; u < 160; ++u) {
      if (!shows(radii, u, v)) continue;
      ++shown;
      EXPECT_NE(mask[static_cast<std::size_t>(v * 160 + u)], 0);
    }
  }
  EXPECT_GT(shown, 500);
}

}  // namespace
}  // namespace rondel
