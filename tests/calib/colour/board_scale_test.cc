// What boards are given: scales against the library's own other scales, membership without division
// on every colour, tables against the sets they stand for.
#include "calib/colour/board_scale.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <opencv2/imgproc.hpp>
#include <random>
#include <string>

#include "calib/colour/class_table.h"

namespace rondel::colour {
namespace {

std::vector<HsvBox> boxes_to_try() {
  std::mt19937 rng{5};
  std::vector<HsvBox> boxes{{},
                            {{170, 9}, {100, 255}, {40, 250}},
                            {{179, 0}, {1, 254}, {1, 254}},
                            {{60, 60}, {128, 128}, {77, 77}},
                            {{90, 89}, {0, 255}, {0, 255}}};
  for (int k = 0; k < 40; ++k) {
    const auto draw = [&](int most) {
      return static_cast<int>(rng() % static_cast<unsigned>(most + 1));
    };
    const auto pair = [&] {
      const int a = draw(255);
      const int b = draw(255);
      return std::array<int, 2>{std::min(a, b), std::max(a, b)};
    };
    boxes.push_back({{draw(179), draw(179)}, pair(), pair()});
  }
  return boxes;
}

bool inside(const ScaledBox& box, int h, int s, int v) {
  const bool hue =
      box.h[0] <= box.h[1] ? box.h[0] <= h && h <= box.h[1] : h >= box.h[0] || h <= box.h[1];
  return hue && box.s[0] <= s && s <= box.s[1] && box.v[0] <= v && v <= box.v[1];
}

/// All RGB565 colours as an image, in 8 bits.
cv::Mat all_rgb565() {
  cv::Mat bgr(256, 256, CV_8UC3);
  for (unsigned value = 0; value < 65536; ++value) {
    const Rgb p = from_rgb565(value);
    bgr.at<cv::Vec3b>(static_cast<int>(value >> 8U), static_cast<int>(value & 255U)) = {
        p.b, p.g, p.r};
  }
  return bgr;
}

TEST(BoardScale, RoundsOutwardIntoTheByteScale) {
  const cv::Mat bgr = all_rgb565();
  cv::Mat full;
  cv::cvtColor(bgr, full, cv::COLOR_BGR2HSV_FULL);  // 256 steps to the circle
  for (const HsvBox& box : boxes_to_try()) {
    const ScaledBox wide = scaled(box, HsvScale::full_byte);
    int lost = 0;
    for (unsigned value = 0; value < 65536; ++value) {
      if (!box.contains(to_hsv(from_rgb565(value)))) continue;
      const auto& p =
          full.at<cv::Vec3b>(static_cast<int>(value >> 8U), static_cast<int>(value & 255U));
      lost += inside(wide, p[0], p[1], p[2]) ? 0 : 1;
    }
    EXPECT_EQ(lost, 0) << box.h.from << ".." << box.h.to;
    // Outward, but not by more than a step of the coarser scale on either side.
    const int arc = (box.h.to - box.h.from + 180) % 180 + 1;
    const int wide_arc = (wide.h[1] - wide.h[0] + 256) % 256 + 1;
    EXPECT_LE(wide_arc, arc * 256.0 / 180.0 + 3.0);
  }
}

TEST(BoardScale, RoundsOutwardIntoDegreesAndPercent) {
  cv::Mat exact;
  cv::Mat bgr;
  all_rgb565().convertTo(bgr, CV_32FC3, 1.0 / 255.0);
  cv::cvtColor(bgr, exact, cv::COLOR_BGR2HSV);  // floats: degrees, 0..1
  for (const HsvBox& box : boxes_to_try()) {
    const ScaledBox wide = scaled(box, HsvScale::degrees_percent);
    int lost = 0;
    for (unsigned value = 0; value < 65536; ++value) {
      if (!box.contains(to_hsv(from_rgb565(value)))) continue;
      const auto& p =
          exact.at<cv::Vec3f>(static_cast<int>(value >> 8U), static_cast<int>(value & 255U));
      const int h = static_cast<int>(std::lround(p[0])) % 360;
      lost += inside(wide,
                     h,
                     static_cast<int>(std::lround(100.0F * p[1])),
                     static_cast<int>(std::lround(100.0F * p[2])))
                  ? 0
                  : 1;
    }
    EXPECT_EQ(lost, 0) << box.h.from << ".." << box.h.to << " -> " << wide.h[0] << ".."
                       << wide.h[1];
  }
  const ScaledBox narrow = scaled({{60, 60}, {128, 128}, {255, 255}}, HsvScale::degrees_percent);
  EXPECT_EQ(narrow.s[0], 50);
  EXPECT_EQ(narrow.s[1], 50);
  EXPECT_GE(narrow.h[0], 118);
  EXPECT_LE(narrow.h[1], 122);
}

TEST(BoardScale, TheSheetHasARowABox) {
  const std::vector<ThresholdSet> sets = {
      {"buoy", {{{175, 10}, {100, 255}, {51, 255}}, {{0, 4}, {0, 255}, {0, 255}}}}, {"dock", {}}};
  EXPECT_EQ(sets_csv(sets, HsvScale::opencv),
            "object,box,h_low,h_high,s_low,s_high,v_low,v_high\n"
            "buoy,1,175,10,100,255,51,255\n"
            "buoy,2,0,4,0,255,0,255\n");
  EXPECT_NE(sets_csv(sets, HsvScale::degrees_percent).find("buoy,1,349,21,39,100,20,100"),
            std::string::npos)
      << sets_csv(sets, HsvScale::degrees_percent);
}

TEST(IntegerBox, AgreesOnEveryColour) {
  // Every RGB565 colour in every box; every 8-bit colour in one that wraps.
  const std::vector<HsvBox> boxes = boxes_to_try();
  for (const HsvBox& box : boxes) {
    const IntegerBox integer = integer_box(box);
    int wrong = 0;
    for (unsigned value = 0; value < 65536; ++value) {
      const Rgb p = from_rgb565(value);
      wrong += contains(integer, p) != box.contains(to_hsv(p)) ? 1 : 0;
    }
    EXPECT_EQ(wrong, 0) << box.h.from << ".." << box.h.to;
  }
  for (std::size_t k = 1; k < 2; ++k) {
    const IntegerBox integer = integer_box(boxes[k]);
    int wrong = 0;
    for (unsigned value = 0; value < (1U << 24U); ++value) {
      const Rgb p{static_cast<std::uint8_t>(value >> 16U),
                  static_cast<std::uint8_t>(value >> 8U),
                  static_cast<std::uint8_t>(value)};
      wrong += contains(integer, p) != boxes[k].contains(to_hsv(p)) ? 1 : 0;
    }
    EXPECT_EQ(wrong, 0) << boxes[k].h.from << ".." << boxes[k].h.to;
  }
}

std::vector<ThresholdSet> some_sets() {
  return {{"orange", {{{172, 14}, {120, 255}, {60, 255}}}},
          {"teal", {{{80, 96}, {90, 255}, {30, 220}}}},
          {"orange_too", {{{5, 20}, {100, 255}, {60, 255}}}}};
}

TEST(ClassTable, IsTheSetsOnRgb565AndTheFirstWins) {
  const std::vector<ThresholdSet> sets = some_sets();
  const ClassTable table = make_class_table(sets);
  int seen[4] = {};
  for (unsigned value = 0; value < 65536; ++value) {
    const Rgb p = from_rgb565(value);
    int want = 0;
    for (int k = 2; k >= 0; --k) {
      if (sets[static_cast<std::size_t>(k)].contains(to_hsv(p))) want = k + 1;
    }
    ASSERT_EQ(table.at(p.r, p.g, p.b), want) << value;
    ++seen[want];
  }
  for (const int count : seen) EXPECT_GT(count, 100);
}

TEST(ClassTable, ShrinksAsFarAsItsLimitAllows) {
  const ClassTable table = make_class_table(some_sets());
  EXPECT_EQ(disagreement(table, table), 0.0);
  std::size_t before = 0;
  for (const double most : {0.2, 0.02, 0.0}) {
    const ClassTable small = smallest_class_table(table, most);
    EXPECT_LE(disagreement(table, small), most);
    EXPECT_GE(small.classes.size(), before);
    before = small.classes.size();
    // None with one bit fewer keeps the limit.
    const int bits = small.bits_r + small.bits_g + small.bits_b - 1;
    for (int r = 2; r <= 5; ++r) {
      for (int g = 2; g <= 6; ++g) {
        const int b = bits - r - g;
        if (b >= 2 && b <= 5) {
          EXPECT_GT(disagreement(table, coarser(table, r, g, b)), most);
        }
      }
    }
  }
  EXPECT_EQ(before, 65536U);
}

TEST(ClassTable, PixelsThatAreSeenDecide) {
  const ClassTable table = make_class_table(some_sets());
  std::vector<std::uint64_t> weights(65536, 0);
  // Only one colour is ever seen: any table that gets it right will do.
  const unsigned orange = to_rgb565({236, 104, 22});
  weights[orange] = 1000;
  const ClassTable small = smallest_class_table(table, 0.0, weights);
  EXPECT_EQ(small.classes.size(), 64U);
  EXPECT_EQ(small.at(236, 104, 22), 1);
}

}  // namespace
}  // namespace rondel::colour
