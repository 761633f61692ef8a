// 8-bit HSV against the library whose scale it is, on every colour there is, and against published
// conversions.
#include "calib/colour/hsv.h"

#include <gtest/gtest.h>

#include <cmath>
#include <opencv2/imgproc.hpp>

namespace rondel::colour {
namespace {

/// Colours of `bgr` whose HSV differs from cvtColor's.
int disagreements(const cv::Mat& bgr) {
  cv::Mat hsv;
  cv::cvtColor(bgr, hsv, cv::COLOR_BGR2HSV);
  int count = 0;
  for (int v = 0; v < bgr.rows; ++v) {
    const auto* in = bgr.ptr<cv::Vec3b>(v);
    const auto* want = hsv.ptr<cv::Vec3b>(v);
    for (int u = 0; u < bgr.cols; ++u) {
      const Hsv got = to_hsv({in[u][2], in[u][1], in[u][0]});
      count += got.h != want[u][0] || got.s != want[u][1] || got.v != want[u][2] ? 1 : 0;
    }
  }
  return count;
}

TEST(Hsv, AgreesWithCvtColorOnAllColours) {
  cv::Mat bgr(256, 256, CV_8UC3);
  int count = 0;
  for (int r = 0; r < 256; ++r) {
    for (int g = 0; g < 256; ++g) {
      auto* row = bgr.ptr<cv::Vec3b>(g);
      for (int b = 0; b < 256; ++b) {
        row[b] = {static_cast<unsigned char>(b),
                  static_cast<unsigned char>(g),
                  static_cast<unsigned char>(r)};
      }
    }
    count += disagreements(bgr);
  }
  EXPECT_EQ(count, 0);
}

TEST(Hsv, AgreesWithCvtColorOnRgb565) {
  cv::Mat bgr(256, 256, CV_8UC3);
  for (unsigned value = 0; value < 65536; ++value) {
    const Rgb p = from_rgb565(value);
    EXPECT_EQ(to_rgb565(p), value);
    bgr.at<cv::Vec3b>(static_cast<int>(value >> 8U), static_cast<int>(value & 255U)) = {
        p.b, p.g, p.r};
  }
  EXPECT_EQ(disagreements(bgr), 0);
}

// Smith 1978, the hexcone: hue in degrees, saturation, value, worked out in double precision.
TEST(Hsv, FollowsTheHexconeWithinItsRounding) {
  struct Row {
    double r, g, b, h_deg, s, v;
  };
  for (const Row& row : {Row{1, 0.5, 0, 30, 1, 1},
                         Row{.628, .643, .142, 61.8, .779, .643},
                         Row{.255, .104, .918, 251.1, .887, .918},
                         Row{.941, .785, .053, 49.5, .944, .941},
                         Row{.931, .463, .316, 14.3, .661, .931},
                         Row{.495, .493, .721, 240.5, .316, .721}}) {
    const auto byte = [](double x) { return static_cast<std::uint8_t>(std::lround(255.0 * x)); };
    const Hsv p = to_hsv({byte(row.r), byte(row.g), byte(row.b)});
    // A channel is off by at most half a level, so value is too; saturation is 1 - low / high, off
    // by one level over `high` at most; hue turns by 60 degrees over the chroma for a level.
    const double high = 255.0 * row.v;
    const double chroma = row.s * high;
    EXPECT_NEAR(p.v, high, 0.5 + 0.0005 * 255.0);
    EXPECT_NEAR(p.s, 255.0 * row.s, 255.0 / high + 0.5 + 0.0005 * 255.0);
    EXPECT_NEAR(2.0 * p.h, row.h_deg, 60.0 * 1.5 / chroma + 1.0 + 0.05);
  }
}

TEST(Hsv, HasNoHueForGreysAndNoSaturationForBlack) {
  EXPECT_EQ(to_hsv({77, 77, 77}).h, 0);
  EXPECT_EQ(to_hsv({77, 77, 77}).s, 0);
  EXPECT_EQ(to_hsv({0, 0, 0}).s, 0);
}

}  // namespace
}  // namespace rondel::colour
