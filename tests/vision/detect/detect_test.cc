// Detection against the image library's own labelling, and against discs and boxes drawn with known
// outlines.
#include "vision/detect/detect.h"

#include <gtest/gtest.h>

#include <cmath>
#include <numbers>
#include <opencv2/imgproc.hpp>
#include <random>

#include "calib/colour/class_table.h"
#include "calib/colour/hsv.h"

namespace rondel::vision {
namespace {

const std::vector<colour::ThresholdSet>& sets() {
  static const std::vector<colour::ThresholdSet> kSets = {
      {"orange", {{{172, 16}, {110, 255}, {60, 255}}}},
      {"teal", {{{80, 100}, {90, 255}, {30, 255}}}},
      {"violet", {{{125, 150}, {70, 255}, {30, 255}}}}};
  return kSets;
}

ObjectSpec object(const char* name, Shape shape, double diameter_m) {
  ObjectSpec spec;
  spec.name = name;
  spec.shape = shape;
  spec.diameter_m = diameter_m;
  return spec;
}

DetectorSetup setup_for(cv::Size size) {
  DetectorSetup setup;
  setup.table = colour::make_class_table(sets());
  setup.mask = cv::Mat(size, CV_8U, cv::Scalar(255));
  setup.objects = {object("orange", Shape::ball, 0.074),
                   object("teal", Shape::box, 0.1),
                   object("violet", Shape::post, 0.1)};
  setup.centre = {0.5 * (size.width - 1), 0.5 * (size.height - 1)};
  setup.least_area_px = 1;
  return setup;
}

const cv::Scalar kOrange(22, 104, 236);
const cv::Scalar kTeal(124, 128, 0);
const cv::Scalar kGrey(120, 120, 120);

/// Blotches of all colours, thin bridges, and single pixels.
cv::Mat blotches(unsigned seed, cv::Size size) {
  std::mt19937 rng{seed};
  cv::Mat image(size, CV_8UC3, kGrey);
  const cv::Scalar colours[] = {kOrange, kTeal, cv::Scalar(150, 58, 104), kGrey, kGrey};
  for (int k = 0; k < 160; ++k) {
    const auto draw = [&](int most) {
      return static_cast<int>(rng() % static_cast<unsigned>(most));
    };
    cv::ellipse(image,
                {draw(size.width), draw(size.height)},
                {1 + draw(18), 1 + draw(12)},
                draw(180),
                0.0,
                40.0 + draw(320),
                colours[draw(5)],
                draw(3) == 0 ? cv::FILLED : 1);
  }
  cv::Mat speckle(size, CV_8U);
  cv::theRNG().state = seed + 1;
  cv::randu(speckle, 0, 255);
  image.setTo(kOrange, speckle > 247);
  return image;
}

struct Want {
  int object = 0;
  int area = 0;
  cv::Rect box;
  double u = 0.0;
  double v = 0.0;
};

/// The library's way: a mask a class, labelled one after the other.
std::vector<Want> by_library(const DetectorSetup& setup, const cv::Mat& bgr) {
  std::vector<Want> wanted;
  for (int o = 0; o < static_cast<int>(setup.objects.size()); ++o) {
    cv::Mat in(bgr.size(), CV_8U, cv::Scalar(0));
    for (int v = 0; v < bgr.rows; ++v) {
      for (int u = 0; u < bgr.cols; ++u) {
        const auto& p = bgr.at<cv::Vec3b>(v, u);
        const colour::Rgb seen = colour::from_rgb565(colour::to_rgb565({p[2], p[1], p[0]}));
        const bool inside = sets()[static_cast<std::size_t>(o)].contains(to_hsv(seen));
        if (inside && setup.mask.at<unsigned char>(v, u) != 0) in.at<unsigned char>(v, u) = 255;
      }
    }
    cv::Mat labels;
    cv::Mat stats;
    cv::Mat centroids;
    const int count = cv::connectedComponentsWithStats(in, labels, stats, centroids, 8);
    for (int k = 1; k < count; ++k) {
      wanted.push_back({o,
                        stats.at<int>(k, cv::CC_STAT_AREA),
                        {stats.at<int>(k, cv::CC_STAT_LEFT),
                         stats.at<int>(k, cv::CC_STAT_TOP),
                         stats.at<int>(k, cv::CC_STAT_WIDTH),
                         stats.at<int>(k, cv::CC_STAT_HEIGHT)},
                        centroids.at<double>(k, 0),
                        centroids.at<double>(k, 1)});
    }
  }
  return wanted;
}

TEST(Detect, FindsTheBlobsThatTheLibraryFinds) {
  for (unsigned seed = 1; seed <= 12; ++seed) {
    const cv::Size size{97 + static_cast<int>(seed), 83};
    DetectorSetup setup = setup_for(size);
    cv::circle(setup.mask, {48, 40}, 9, cv::Scalar(0), cv::FILLED);
    setup.mask.colRange(0, 3) = 0;
    const cv::Mat bgr = blotches(seed, size);
    std::vector<Want> want = by_library(setup, bgr);
    const std::vector<Blob> got = detect(setup, bgr);
    ASSERT_EQ(got.size(), want.size()) << "seed " << seed;
    EXPECT_GT(want.size(), 30U);
    for (const Blob& blob : got) {
      const auto same = std::find_if(want.begin(), want.end(), [&](const Want& w) {
        return w.object == blob.object && w.area == blob.area_px && w.box == blob.box &&
               std::abs(w.u - blob.plain_centroid.u_px) < 1e-9 &&
               std::abs(w.v - blob.plain_centroid.v_px) < 1e-9;
      });
      ASSERT_NE(same, want.end()) << "seed " << seed << " area " << blob.area_px;
      want.erase(same);
    }
    for (std::size_t k = 1; k < got.size(); ++k) {
      if (got[k].object != got[k - 1].object) {
        EXPECT_GT(got[k].object, got[k - 1].object);
      } else {
        EXPECT_LE(got[k].area_px, got[k - 1].area_px);
      }
    }
  }
}

/// A disc with its border mixed in proportion to what each pixel covers (64 samples), over grey.
cv::Mat soft_disc(cv::Size size, double u0, double v0, double radius, const cv::Scalar& colour) {
  cv::Mat image(size, CV_8UC3, kGrey);
  for (int v = 0; v < size.height; ++v) {
    for (int u = 0; u < size.width; ++u) {
      int inside = 0;
      for (int k = 0; k < 64; ++k) {
        const double du = u + (k % 8 - 3.5) / 8.0 - u0;
        const double dv = v + (k / 8 - 3.5) / 8.0 - v0;
        inside += du * du + dv * dv <= radius * radius ? 1 : 0;
      }
      auto& p = image.at<cv::Vec3b>(v, u);
      for (int c = 0; c < 3; ++c) {
        // Light mixes in linear light; the power 2.2 is near enough to the coded curve.
        const double mixed = std::pow(kGrey[c] / 255.0, 2.2) * (64 - inside) / 64.0 +
                             std::pow(colour[c] / 255.0, 2.2) * inside / 64.0;
        p[c] = cv::saturate_cast<unsigned char>(255.0 * std::pow(mixed, 1.0 / 2.2));
      }
    }
  }
  return image;
}

TEST(Detect, CentroidsAreSubPixelAndPurityHelps) {
  std::mt19937 rng{3};
  std::uniform_real_distribution<double> fraction(0.0, 1.0);
  double plain2 = 0.0;
  double weighted2 = 0.0;
  const int trials = 100;
  for (int k = 0; k < trials; ++k) {
    const double u0 = 30.0 + fraction(rng);
    const double v0 = 25.0 + fraction(rng);
    const double radius = 2.0 + 3.0 * fraction(rng);
    const DetectorSetup setup = setup_for({64, 48});
    const auto blobs = detect(setup, soft_disc({64, 48}, u0, v0, radius, kOrange));
    ASSERT_FALSE(blobs.empty());
    const auto error2 = [&](ImagePoint p) {
      return (p.u_px - u0) * (p.u_px - u0) + (p.v_px - v0) * (p.v_px - v0);
    };
    plain2 += error2(blobs[0].plain_centroid);
    weighted2 += error2(blobs[0].centroid);
    EXPECT_EQ(blobs[0].measured, blobs[0].centroid);
  }
  // A centroid of whole pixels errs by the rounding of the outline; weights take most of that away.
  EXPECT_LT(std::sqrt(weighted2 / trials), 0.6 * std::sqrt(plain2 / trials))
      << std::sqrt(weighted2 / trials) << " against " << std::sqrt(plain2 / trials) << " px";
  EXPECT_LT(std::sqrt(weighted2 / trials), 0.1);
}

TEST(Detect, ABoxIsMeasuredAtItsFoot) {
  // A box across the line of sight at any azimuth: its near side is 20 px from the centre.
  const DetectorSetup setup = setup_for({121, 121});
  for (int turn = 0; turn < 360; turn += 15) {
    const double azimuth = turn * std::numbers::pi / 180.0;
    cv::Mat image(121, 121, CV_8UC3, kGrey);
    for (int v = 0; v < 121; ++v) {
      for (int u = 0; u < 121; ++u) {
        const double x = (u - 60) * std::cos(azimuth) + (v - 60) * std::sin(azimuth);
        const double y = (v - 60) * std::cos(azimuth) - (u - 60) * std::sin(azimuth);
        if (x >= 20.0 && x <= 34.0 && std::abs(y) <= 7.0) image.at<cv::Vec3b>(v, u) = {124, 128, 0};
      }
    }
    const auto blobs = detect(setup, image);
    ASSERT_EQ(blobs.size(), 1U);
    const double u = blobs[0].measured.u_px - 60.0;
    const double v = blobs[0].measured.v_px - 60.0;
    // Pixels' centres are inside or not: the edge is known to half a pixel, and on the diagonal the
    // nearest centre of three lines lies up to 0.7 px behind it.
    EXPECT_NEAR(std::hypot(u, v), 20.0, 0.75) << turn;
    EXPECT_NEAR(std::remainder(std::atan2(v, u) - azimuth, 2.0 * std::numbers::pi), 0.0, 0.03)
        << turn;
  }
}

TEST(Detect, SaysWhatTheMaskCuts) {
  DetectorSetup setup = setup_for({64, 48});
  const cv::Mat image = soft_disc({64, 48}, 30.0, 24.0, 5.0, kOrange);
  EXPECT_FALSE(detect(setup, image).at(0).cut_by_mask);
  setup.mask.colRange(0, 28) = 0;
  EXPECT_TRUE(detect(setup, image).at(0).cut_by_mask);
  setup.mask.colRange(0, 64) = 255;
  setup.mask.rowRange(33, 48) = 0;  // one row away from the disc
  EXPECT_FALSE(detect(setup, soft_disc({64, 48}, 30.0, 25.0, 5.0, kOrange)).at(0).cut_by_mask);
  setup.mask.rowRange(31, 48) = 0;
  EXPECT_TRUE(detect(setup, soft_disc({64, 48}, 30.0, 25.0, 5.0, kOrange)).at(0).cut_by_mask);
}

/// A pinhole looking straight down from 1 m, 100 px to the radian: range r appears at 100 r / (1 -
/// h).
class LookingDown : public FloorMap {
 public:
  std::optional<FloorSpot> floor_at(ImagePoint at, double height_m) const override {
    const double u = at.u_px - 100.0;
    const double v = at.v_px - 100.0;
    return FloorSpot{std::hypot(u, v) / 100.0 * (1.0 - height_m), std::atan2(v, u)};
  }
  std::optional<ImagePoint> pixel_of(FloorSpot spot, double height_m) const override {
    const double radius = 100.0 * spot.range_m / (1.0 - height_m);
    return ImagePoint{100.0 + radius * std::cos(spot.bearing_rad),
                      100.0 + radius * std::sin(spot.bearing_rad)};
  }
};

TEST(Detect, SizeMustFitTheRange) {
  const LookingDown map;
  DetectorSetup setup = setup_for({201, 201});
  setup.centre = {100.0, 100.0};
  setup.map = &map;
  setup.objects[0].diameter_m = 0.2;  // a ball of 20 px
  const auto count = [&](double radius_px) {
    return detect(setup, soft_disc({201, 201}, 150.0, 100.0, radius_px, kOrange)).size();
  };
  EXPECT_EQ(count(11.0), 1U);
  EXPECT_EQ(count(6.0), 1U);   // half hidden things are smaller
  EXPECT_EQ(count(2.0), 0U);   // a speck of the colour is not the ball
  EXPECT_EQ(count(24.0), 0U);  // nor is a poster
  setup.map = nullptr;
  EXPECT_EQ(count(24.0), 1U);
}

}  // namespace
}  // namespace rondel::vision
