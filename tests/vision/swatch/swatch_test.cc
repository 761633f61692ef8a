// Swatches on drawn images: which pixels they stand for, what is left out of the surroundings, and
// how much noise the frames show.
#include <gtest/gtest.h>

#include <cmath>
#include <opencv2/imgproc.hpp>
#include <random>

#include "calib/colour/hsv.h"
#include "vision/swatch/collect.h"
#include "vision/swatch/cover.h"
#include "vision/swatch/noise.h"

namespace rondel::vision {
namespace {

const cv::Scalar kFloor(96, 100, 98);
const cv::Scalar kOrange(30, 110, 225);
const cv::Size kSize{160, 120};

cv::Mat open_mask() { return {kSize, CV_8U, cv::Scalar(255)}; }

/// A floor with a little noise and a shaded orange ball.
cv::Mat floor_with_balls(const std::vector<cv::Point>& balls, int radius, double noise_sd) {
  cv::Mat image(kSize, CV_8UC3, kFloor);
  for (const cv::Point at : balls) {
    for (int v = 0; v < kSize.height; ++v) {
      for (int u = 0; u < kSize.width; ++u) {
        const double x = (u - at.x) / static_cast<double>(radius);
        const double y = (v - at.y) / static_cast<double>(radius);
        if (x * x + y * y > 1.0) continue;
        const double shade = 0.75 + 0.25 * (-x - y) / std::sqrt(2.0);  // lit from the upper left
        for (int c = 0; c < 3; ++c) {
          image.at<cv::Vec3b>(v, u)[c] = cv::saturate_cast<unsigned char>(shade * kOrange[c]);
        }
      }
    }
  }
  cv::Mat noise(kSize, CV_16SC3);
  cv::theRNG().state = 77;
  cv::randn(noise, 0.0, noise_sd);
  cv::add(image, noise, image, cv::noArray(), CV_8U);
  return image;
}

int count(const cv::Mat& area) { return cv::countNonZero(area); }

TEST(Cover, ShapesCountPixelsWhoseCentreIsInside) {
  const cv::Mat image(kSize, CV_8UC3, kFloor);
  EXPECT_EQ(count(cover(Box{{10.0, 20.0}, {14.0, 22.5}}, image, open_mask()).whole), 5 * 3);
  EXPECT_EQ(count(cover(Disc{{30.0, 30.0}, 1.0}, image, open_mask()).whole), 5);
  const Polygon triangle{{{9.5, 9.5}, {19.5, 9.5}, {9.5, 19.5}}};
  EXPECT_NEAR(count(cover(triangle, image, open_mask()).whole), 50, 5);
  const Cover box = cover(Box{{10.0, 20.0}, {14.0, 22.0}}, image, open_mask());
  EXPECT_EQ(count(box.inner), 3);  // the ring of border pixels is left out
  const Cover speck = cover(Disc{{30.0, 30.0}, 0.5}, image, open_mask());
  EXPECT_EQ(count(speck.inner), 1);
  cv::Mat mask = open_mask();
  mask.colRange(0, 12) = 0;
  EXPECT_EQ(count(cover(Box{{10.0, 20.0}, {14.0, 22.0}}, image, mask).whole), 9);
}

TEST(Cover, GrowFillsTheObjectAndStopsAtItsEdge) {
  for (const double noise_sd : {0.0, 3.0}) {
    const cv::Mat image = floor_with_balls({{60, 50}, {100, 80}}, 11, noise_sd);
    cv::Mat truth(kSize, CV_8U, cv::Scalar(0));
    cv::circle(truth, {60, 50}, 11, cv::Scalar(255), cv::FILLED);
    for (const ImagePoint seed :
         {ImagePoint{60.0, 50.0}, ImagePoint{55.0, 46.0}, ImagePoint{65.0, 54.0}}) {
      const cv::Mat grown = cover(Grow{seed}, image, open_mask()).whole;
      EXPECT_GE(count(grown & truth), 0.9 * count(truth)) << noise_sd << " from " << seed.u_px;
      cv::Mat wide;
      cv::dilate(truth, wide, cv::Mat());
      EXPECT_EQ(count(grown & ~wide), 0) << noise_sd << " from " << seed.u_px;
    }
  }
}

TEST(Cover, GrowKeepsToTheSizeItIsGiven) {
  const cv::Mat image(kSize, CV_8UC3, kFloor);  // nothing to stop it
  EXPECT_LE(count(cover(Grow{{80.0, 60.0}}, image, open_mask(), 200.0).whole), 200);
  EXPECT_EQ(count(cover(Grow{{80.0, 60.0}}, image, cv::Mat::zeros(kSize, CV_8U)).whole), 0);
}

Swatch swatch(const std::string& image, const std::string& label, Region region) {
  Swatch out;
  out.image = image;
  out.label = label;
  out.region = std::move(region);
  return out;
}

bool any_orange(const colour::RgbCounts& counts) {
  return std::any_of(counts.entries.begin(), counts.entries.end(), [](const auto& entry) {
    const colour::Hsv p = to_hsv(entry.colour);
    return p.h >= 5 && p.h <= 20 && p.s > 150;
  });
}

TEST(Collect, UnlabelledObjectsAreNamedAndLeftOut) {
  ObjectSpec buoy;
  buoy.name = "buoy";
  const std::vector<ObjectSpec> objects = {buoy};
  std::vector<Frame> frames(2);
  frames[0] = {"frames/a.png", "", floor_with_balls({{60, 50}, {120, 80}}, 11, 2.0)};
  frames[1] = {"frames/b.png", "", floor_with_balls({{60, 50}}, 11, 2.0)};
  std::vector<Swatch> swatches = {swatch("frames/a.png", "buoy", Disc{{60.0, 50.0}, 9.0}),
                                  swatch("frames/b.png", "buoy", Disc{{60.0, 50.0}, 9.0})};
  Progress quiet;
  Labelled labelled = collect(frames, swatches, objects, open_mask(), quiet);
  ASSERT_EQ(labelled.lights.size(), 1U);
  ASSERT_EQ(labelled.look_alikes.size(), 1U);
  EXPECT_EQ(labelled.look_alikes[0].image, "frames/a.png");
  EXPECT_NEAR(labelled.look_alikes[0].at.u_px, 120.0, 1.0);
  EXPECT_NEAR(labelled.look_alikes[0].at.v_px, 80.0, 1.0);
  EXPECT_FALSE(any_orange(labelled.lights[0].surroundings));
  EXPECT_TRUE(any_orange(labelled.lights[0].objects[0]));
  // Two frames of 19200 pixels, less three balls with their borders.
  EXPECT_NEAR(
      static_cast<double>(labelled.lights[0].surroundings.total()), 2.0 * 19200 - 3 * 650, 900.0);

  // Painted as surroundings, it counts as such.
  swatches.push_back(swatch("frames/a.png", kSurroundings, Disc{{120.0, 80.0}, 12.0}));
  labelled = collect(frames, swatches, objects, open_mask(), quiet);
  EXPECT_TRUE(labelled.look_alikes.empty());
  EXPECT_TRUE(any_orange(labelled.lights[0].surroundings));
}

TEST(Collect, LightsAreKeptApart) {
  ObjectSpec buoy;
  buoy.name = "buoy";
  const std::vector<Frame> frames = {
      {"frames/noon/a.png", "noon", floor_with_balls({{60, 50}}, 11, 2.0)},
      {"frames/dusk/a.png", "dusk", floor_with_balls({{60, 50}}, 11, 2.0)},
      {"frames/dusk/b.png", "dusk", floor_with_balls({}, 11, 2.0)}};
  const std::vector<Swatch> swatches = {
      swatch("frames/noon/a.png", "buoy", Grow{{60.0, 50.0}}),
      swatch("frames/dusk/a.png", "buoy", Disc{{60.0, 50.0}, 5.0})};
  Progress quiet;
  const Labelled labelled = collect(frames, swatches, {buoy}, open_mask(), quiet);
  ASSERT_EQ(labelled.lights.size(), 2U);
  EXPECT_EQ(labelled.lights[0].light, "dusk");
  EXPECT_EQ(labelled.lights[1].light, "noon");
  EXPECT_GT(labelled.swatch_pixels[1][0], 3 * labelled.swatch_pixels[0][0]);
  // The frame without a swatch is not looked at.
  EXPECT_LT(labelled.lights[0].surroundings.total(), 19200U);
}

TEST(Noise, IsWhatWasPutIn) {
  // Variance = read + shot * light in linear light, over a ramp; 8-bit rounding adds little here.
  std::mt19937 rng{9};
  std::normal_distribution<double> normal(0.0, 1.0);
  const double read = 2e-5;
  const double shot = 4e-4;
  std::vector<cv::Mat> frames;
  for (int k = 0; k < 4; ++k) {
    cv::Mat frame(kSize, CV_8UC3);
    for (int v = 0; v < kSize.height; ++v) {
      for (int u = 0; u < kSize.width; ++u) {
        const double light = 0.05 + 0.7 * u / kSize.width;
        for (int c = 0; c < 3; ++c) {
          const double noisy = light + std::sqrt(read + shot * light) * normal(rng);
          const double coded =
              noisy <= 0.0031308 ? 12.92 * noisy : 1.055 * std::pow(noisy, 1.0 / 2.4) - 0.055;
          frame.at<cv::Vec3b>(v, u)[c] = cv::saturate_cast<unsigned char>(255.0 * coded);
        }
      }
    }
    frames.push_back(frame);
  }
  const colour::SensorNoise noise = noise_of(frames, open_mask());
  for (std::size_t c = 0; c < 3; ++c) {
    for (const double light : {0.1, 0.4, 0.7}) {
      const double want = read + shot * light;
      // 76 800 pixels in about ten bins: a bin's variance, from a median, is known to
      // 2 * 1.17 / sqrt(2 * 7000) = 2 %; rounding to levels adds up to 4 % in the brightest.
      EXPECT_NEAR(noise.read[c] + noise.shot[c] * light, want, 0.12 * want) << c << " at " << light;
    }
  }
}

}  // namespace
}  // namespace rondel::vision
