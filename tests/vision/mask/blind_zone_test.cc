#include "vision/mask/blind_zone.h"

#include <gtest/gtest.h>

#include <cmath>

namespace rondel::vision {
namespace {

/// A map of plain geometry: a radius of r px shows range r / 100 m, bearing as the azimuth.
class Plain : public FloorMap {
 public:
  [[nodiscard]] std::optional<FloorSpot> floor_at(ImagePoint at, double) const override {
    return to_spot({(at.u_px - 160.0) / 100.0, (at.v_px - 120.0) / 100.0});
  }
  [[nodiscard]] std::optional<ImagePoint> pixel_of(FloorSpot spot, double) const override {
    if (spot.range_m > 1.1) return std::nullopt;
    const FloorPoint p = to_point(spot);
    return ImagePoint{160.0 + 100.0 * p.x_m, 120.0 + 100.0 * p.y_m};
  }
};

TEST(BlindZone, DiscAndPostComeOutInMetres) {
  cv::Mat mask(240, 320, CV_8U, cv::Scalar(255));
  for (int v = 0; v < 240; ++v) {
    for (int u = 0; u < 320; ++u) {
      const double r = std::hypot(u - 160.0, v - 120.0);
      const bool post = u > 160 && std::abs(v - 120) <= 2 && r > 50.0 && r < 80.0;
      if (r < 30.0 || post) mask.at<std::uint8_t>(v, u) = 0;
    }
  }
  const BlindZone zone = blind_zone(mask, Plain{}, 120, 3.0);
  // A pixel is 10 mm here, and a step 3 to 8 mm.
  EXPECT_NEAR(zone.unseen_radius_m, 0.30, 0.012);
  EXPECT_NEAR(zone.seen_from_m, 0.30, 0.012);
  int posts = 0;
  for (const HiddenStretch& stretch : zone.hidden) {
    if (stretch.from_m < 0.4) continue;
    ++posts;
    EXPECT_LT(std::abs(stretch.bearing_rad), 0.06);
    EXPECT_NEAR(stretch.from_m, 0.50, 0.02);
    EXPECT_GT(stretch.to_m, stretch.from_m);
    if (stretch.bearing_rad == 0.0) {
      EXPECT_NEAR(stretch.to_m, 0.80, 0.02);
    }
  }
  EXPECT_GE(posts, 1);
  EXPECT_EQ(zone.hidden.size(), 120U + static_cast<std::size_t>(posts));
}

TEST(BlindZone, WhatTheMapDoesNotCoverIsNoBlindZone) {
  const cv::Mat mask(240, 320, CV_8U, cv::Scalar(255));
  for (const HiddenStretch& stretch : blind_zone(mask, Plain{}, 60, 3.0).hidden) {
    EXPECT_LT(stretch.to_m, 0.02);
  }
}

}  // namespace
}  // namespace rondel::vision
