#include "vision/scene/render.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <filesystem>
#include <nlohmann/json.hpp>
#include <numbers>
#include <opencv2/imgcodecs.hpp>
#include <opencv2/imgproc.hpp>

#include "calib/base/file.h"
#include "vision/scene/light_colour.h"
#include "vision/scene/survey.h"

namespace rondel::scene {
namespace {

using Json = nlohmann::json;

/// A practice hall as a small camera sees it: quick to render.
Scene small_scene(unsigned seed, int frames_per_light) {
  SceneRig rig;
  rig.width_px = 160;
  rig.height_px = 120;
  rig.focal_px = 130.0;
  rig.tilt_x_rad = 0.012;
  rig.tilt_y_rad = -0.020;
  rig.shift_x_m = 0.0004;
  rig.lean_x_rad = 0.01;
  rig.heading_rad = 0.7;
  Scene scene = practice_scene(rig, seed, frames_per_light);
  scene.sensor.supersample = 1;
  return scene;
}

/// One lamp over an empty, even floor without a hall to throw light back.
Scene bare_floor() {
  Scene scene;
  scene.rig.width_px = 160;
  scene.rig.height_px = 120;
  scene.rig.focal_px = 130.0;
  scene.sensor.supersample = 1;
  scene.sensor.mirror_reflectance = 0.8;
  scene.floor.hall = {{0.3, 0.4, 0.5}, 0.0};
  scene.floor.mat_low = scene.floor.mat_high = {};
  scene.floor.texture = 0.0;
  Light light;
  light.ambient_lux = 0.0;
  light.exposure_lux = 500.0;
  light.lamps = {{{0.0, 0.0, 2.0}, 0.005, 200.0, 6500.0}};
  scene.lights = {light};
  scene.frames = {{"frames/a.png", 0, {}, {}}};
  return scene;
}

/// Linear light at a spot of the floor, bilinear.
Vec3 light_at(const Scene& scene, const cv::Mat& linear, FloorSpot spot) {
  const auto at = pixel_of(scene.rig, spot);
  EXPECT_TRUE(at);
  const int u = static_cast<int>(std::floor(at->u_px));
  const int v = static_cast<int>(std::floor(at->v_px));
  const auto fu = static_cast<float>(at->u_px - u);
  const auto fv = static_cast<float>(at->v_px - v);
  const cv::Vec3f c =
      (1.0F - fv) *
          ((1.0F - fu) * linear.at<cv::Vec3f>(v, u) + fu * linear.at<cv::Vec3f>(v, u + 1)) +
      fv * ((1.0F - fu) * linear.at<cv::Vec3f>(v + 1, u) + fu * linear.at<cv::Vec3f>(v + 1, u + 1));
  return {static_cast<double>(c[2]), static_cast<double>(c[1]), static_cast<double>(c[0])};
}

TEST(Render, SameBitsWhateverTheNumberOfThreads) {
  const Scene scene = small_scene(3, 1);
  const RenderedFrame one = render(scene, 0, 1);
  const RenderedFrame three = render(scene, 0, 3);
  const RenderedFrame many = render(scene, 0, 500);
  for (const RenderedFrame* other : {&three, &many}) {
    EXPECT_EQ(cv::norm(one.bgr, other->bgr, cv::NORM_INF), 0.0);
    EXPECT_EQ(cv::norm(one.truth.classes, other->truth.classes, cv::NORM_INF), 0.0);
    EXPECT_EQ(truth_json(scene, {one.truth}), truth_json(scene, {other->truth}));
  }
  const FrameTruth truth = trace_truth(scene, 0, 2);
  EXPECT_EQ(truth_json(scene, {one.truth}), truth_json(scene, {truth}));
}

TEST(Render, ClassesFollowTheRimEllipseAndTheHorizon) {
  const Scene scene = small_scene(4, 1);
  const FrameTruth truth = trace_truth(scene, 0);
  int floor = 0;
  for (int v = 0; v < truth.classes.rows; ++v) {
    for (int u = 0; u < truth.classes.cols; ++u) {
      const auto shows = static_cast<PixelClass>(truth.classes.at<unsigned char>(v, u));
      const double du = u - truth.rim.centre.u_px;
      const double dv = v - truth.rim.centre.v_px;
      const double inside = std::hypot(du, dv) - rim_radius_px(truth.rim, std::atan2(dv, du));
      if (std::abs(inside) > 1e-6) {
        EXPECT_EQ(shows == PixelClass::beyond, inside > 0.0) << u << " " << v;
      }
      EXPECT_EQ(truth.mask.at<unsigned char>(v, u), shows >= PixelClass::floor ? 255 : 0);
      if (shows != PixelClass::floor) continue;
      ++floor;
      const ImagePoint at{static_cast<double>(u), static_cast<double>(v)};
      ASSERT_TRUE(floor_at(scene.rig, at)) << u << " " << v;
    }
  }
  EXPECT_GT(floor, 1000);
}

TEST(Render, BallsCoverExactlyThePixelsWhoseRayPassesNearTheirMiddle) {
  const Scene scene = small_scene(5, 1);
  int covered = 0;
  for (std::size_t f = 0; f < scene.frames.size(); ++f) {
    const FrameTruth truth = trace_truth(scene, f);
    for (const ObjectTruth& seen : truth.seen) {
      if (seen.name != "buoy") continue;
      EXPECT_NEAR(seen.height_m, 0.037, 1e-12);
      const FloorPoint foot = to_point(seen.spot);
      for (int v = 0; v < truth.objects.rows; ++v) {
        for (int u = 0; u < truth.objects.cols; ++u) {
          // Two places on the pixel's line: at the ball's height and at the floor.
          const ImagePoint at{static_cast<double>(u), static_cast<double>(v)};
          const auto low = floor_at(scene.rig, at, 0.0);
          const auto high = floor_at(scene.rig, at, 0.037);
          if (!low || !high) continue;
          const FloorPoint a = to_point(*low);
          const FloorPoint b = to_point(*high);
          const Vec3 along = unit({b.x_m - a.x_m, b.y_m - a.y_m, 0.037});
          const double off = length(cross(along, Vec3{foot.x_m - a.x_m, foot.y_m - a.y_m, 0.037}));
          const bool is_it =
              truth.objects.at<unsigned char>(v, u) == static_cast<unsigned char>(seen.object + 1);
          if (is_it) {
            EXPECT_LT(off, 0.037 + 1e-9) << u << " " << v;
            ++covered;
          } else if (off < 0.037 - 1e-9) {
            // Something stands before it.
            const auto shows = static_cast<PixelClass>(truth.classes.at<unsigned char>(v, u));
            EXPECT_NE(shows, PixelClass::floor) << u << " " << v;
            EXPECT_NE(shows, PixelClass::wall) << u << " " << v;
            EXPECT_GT(seen.hidden_fraction, 0.0) << u << " " << v;
          }
        }
      }
    }
  }
  EXPECT_GT(covered, 100);
}

TEST(Render, TruthOfObjectsAgreesWithTheirMap) {
  const Scene scene = small_scene(6, 2);
  int visible = 0;
  for (std::size_t f = 0; f < scene.frames.size(); ++f) {
    const FrameTruth truth = trace_truth(scene, f);
    ASSERT_EQ(truth.seen.size(), 6U);
    for (const ObjectTruth& seen : truth.seen) {
      const cv::Mat own = truth.objects == static_cast<double>(seen.object + 1);
      // One ray a pixel: area and middle are those of the map.
      const cv::Moments moments = cv::moments(own, true);
      EXPECT_EQ(seen.area_px, moments.m00);
      if (seen.area_px == 0.0) {
        EXPECT_FALSE(seen.centroid);
        continue;
      }
      EXPECT_NEAR(seen.centroid->u_px, moments.m10 / moments.m00, 1e-9);
      EXPECT_NEAR(seen.centroid->v_px, moments.m01 / moments.m00, 1e-9);
      EXPECT_EQ(seen.box_px, cv::boundingRect(own));
      if (seen.hidden_fraction > 0.0 || !seen.at) continue;
      if (seen.name == "buoy") {
        const int u = static_cast<int>(std::lround(seen.at->u_px));
        const int v = static_cast<int>(std::lround(seen.at->v_px));
        if (seen.area_px >= 4.0) {
          EXPECT_EQ(own.at<unsigned char>(v, u), 255);
        }
        ++visible;
      } else if (seen.area_px > 30.0) {
        // A box's foot: 15 mm before it there is floor, 15 mm up its side the box.
        const auto before = pixel_of(scene.rig, {seen.spot.range_m - 0.015, seen.spot.bearing_rad});
        const auto above = pixel_of(scene.rig, seen.spot, 0.015);
        ASSERT_TRUE(before && above);
        const auto shows = [&](ImagePoint p) {
          return truth.objects.at<unsigned char>(static_cast<int>(std::lround(p.v_px)),
                                                 static_cast<int>(std::lround(p.u_px)));
        };
        if (seen.spot.range_m < 0.5) {
          EXPECT_NE(shows(*before), seen.object + 1);
          EXPECT_EQ(shows(*above), seen.object + 1);
          ++visible;
        }
      }
    }
  }
  EXPECT_GE(visible, 8);
}

TEST(Render, FloorUnderALampFollowsTheFourthPowerOfTheCosine) {
  // A lamp that is small against its distance: E = E0 cos^4, and a matt floor sends albedo x E.
  const Scene scene = bare_floor();
  const cv::Mat linear = render_linear(scene, 0);
  const Vec3 colour = light_colour(6500.0);
  for (const double range : {0.3, 0.5, 0.8, 1.2}) {
    const double cos2 = 4.0 / (4.0 + range * range);
    const double expected = 0.8 * (200.0 / 500.0) * cos2 * cos2;
    const Vec3 got = light_at(scene, linear, {range, 0.4});
    EXPECT_NEAR(got.x / (0.3 * colour.x * expected), 1.0, 0.01) << range;
    EXPECT_NEAR(got.y / (0.4 * colour.y * expected), 1.0, 0.01) << range;
    EXPECT_NEAR(got.z / (0.5 * colour.z * expected), 1.0, 0.01) << range;
  }
}

TEST(Render, AStopDoublesTheLight) {
  Scene scene = bare_floor();
  const cv::Mat once = render_linear(scene, 0);
  scene.lights[0].stops = 1.0;
  const cv::Mat twice = render_linear(scene, 0);
  EXPECT_LT(cv::norm(2.0 * once, twice, cv::NORM_INF), 1e-6 * cv::norm(twice, cv::NORM_INF));
}

TEST(Render, AThingBetweenLampAndFloorCastsItsShadow) {
  // A small lamp at (2.5, 0, 1), a ball of 74 mm at (0.5, 0): the line through its middle meets the
  // floor at 2.5 - 2.0 / (1 - 0.037) = 0.4232 m; 12 cm to the side there is light.
  Scene scene = bare_floor();
  scene.lights[0].lamps = {{{2.5, 0.0, 1.0}, 0.005, 200.0, 6500.0}};
  SceneObject ball;
  ball.name = "buoy";
  ball.id = "one";
  ball.diameter_m = 0.074;
  ball.at = {0.5, 0.0};
  scene.objects = {ball};
  const cv::Mat linear = render_linear(scene, 0);
  const Vec3 dark = light_at(scene, linear, to_spot(FloorPoint{0.4232, 0.0}));
  const Vec3 lit = light_at(scene, linear, to_spot(FloorPoint{0.4232, 0.12}));
  // E = 200 lx x 1 m^2 x cos cos / d^2, both cosines 1 / d of a fall of 1 m.
  const double d2 = 2.0768 * 2.0768 + 0.12 * 0.12 + 1.0;
  const double expected = 0.8 * 0.4 * (200.0 / 500.0) / (d2 * d2) * light_colour(6500.0).y;
  EXPECT_NEAR(lit.y / expected, 1.0, 0.02);
  EXPECT_LT(dark.y, 1e-6);
  // Without lamps what is near a thing is darker than the open floor: less sky.
  scene.lights[0].lamps.clear();
  scene.lights[0].ambient_lux = 200.0;
  const cv::Mat soft = render_linear(scene, 0);
  const double contact = light_at(scene, soft, to_spot(FloorPoint{0.45, 0.0})).y;
  const double open = light_at(scene, soft, to_spot(FloorPoint{0.45, 0.4})).y;
  EXPECT_LT(contact, 0.97 * open);
  EXPECT_GT(contact, 0.3 * open);
}

TEST(Render, RobotIsTheSameInEveryFrame) {
  const Scene scene = small_scene(7, 1);
  const cv::Mat first = trace_truth(scene, 0).mask;
  for (std::size_t f = 1; f < scene.frames.size(); ++f) {
    EXPECT_EQ(cv::norm(first, trace_truth(scene, f).mask, cv::NORM_INF), 0.0);
  }
  EXPECT_GT(cv::countNonZero(first == 0), 0);
}

TEST(Render, MoreRaysAverageWhatOneRayPicks) {
  // Sixteen rays of a pixel are the four of each quarter: rendering at twice the size with four
  // rays a pixel and averaging 2 x 2 pixels shows the same places.
  Scene scene = bare_floor();
  scene.floor.lanes = {{{{-1.0, 0.3}, {1.0, 0.5}}, 0.05, {0.9, 0.9, 0.9}}};
  scene.sensor.supersample = 4;
  const cv::Mat sixteen = render_linear(scene, 0);
  scene.rig.width_px *= 2;
  scene.rig.height_px *= 2;
  scene.rig.focal_px *= 2.0;
  scene.sensor.supersample = 2;
  const cv::Mat fine = render_linear(scene, 0);
  cv::Mat averaged;
  cv::resize(fine, averaged, sixteen.size(), 0.0, 0.0, cv::INTER_AREA);
  // The light is worked out once a pixel and surface, so it may differ by its change over a pixel.
  int off = 0;
  for (int v = 0; v < sixteen.rows; ++v) {
    for (int u = 0; u < sixteen.cols; ++u) {
      const float a = sixteen.at<cv::Vec3f>(v, u)[1];
      const float b = averaged.at<cv::Vec3f>(v, u)[1];
      off += std::abs(a - b) > 0.02F * std::max(a, b) + 1e-3F ? 1 : 0;
    }
  }
  EXPECT_LT(off, sixteen.rows * sixteen.cols / 200);
}

TEST(TruthJson, HoldsTheTruthOfRigAndFrame) {
  const Scene scene = small_scene(9, 1);
  const FrameTruth truth = trace_truth(scene, 1);
  const Json json = Json::parse(truth_json(scene, {truth}));
  EXPECT_NEAR(json["centre"]["u_px"].get<double>(), truth.rim.centre.u_px, 1e-5);
  EXPECT_NEAR(json["rim"]["a_px"].get<double>(), truth.rim.ellipse.a_px, 1e-5);
  ASSERT_GT(json["ranges"].size(), 100U);
  for (std::size_t k = 0; k < json["ranges"].size(); k += 17) {
    const Json& sample = json["ranges"][k];
    const auto spot = floor_at(scene.rig, {sample["u_px"], sample["v_px"]});
    ASSERT_TRUE(spot);
    // The pixel is rounded to 5e-5 px; far out a pixel is metres.
    EXPECT_NEAR(spot->range_m, sample["range_m"].get<double>(), 1e-3 * spot->range_m);
  }
  const Json& frame = json["frames"][0];
  EXPECT_EQ(frame["image"], truth.image);
  EXPECT_EQ(frame["light"], "dusk");
  EXPECT_EQ(frame["classes"], "frames/dusk/0001-classes.png");
  ASSERT_EQ(frame["objects"].size(), truth.seen.size());
  for (std::size_t k = 0; k < truth.seen.size(); ++k) {
    const Json& object = frame["objects"][k];
    EXPECT_EQ(object["object"], truth.seen[k].name);
    EXPECT_NEAR(object["range_m"].get<double>(), truth.seen[k].spot.range_m, 1e-6);
    const auto at = pixel_of(scene.rig, truth.seen[k].spot, truth.seen[k].height_m);
    ASSERT_EQ(at.has_value(), object.contains("u_px"));
    if (at) {
      EXPECT_NEAR(object["u_px"].get<double>(), at->u_px, 1e-5);
    }
  }
}

TEST(SampleVenue, IsRenderedBitForBit) {
  const std::filesystem::path datasets = std::filesystem::path(RONDEL_SOURCE_DIR) / "datasets";
  const std::filesystem::path truth_folder = datasets / "quay-truth";
  const Scene scene = read_scene(truth_folder / "scene.yaml");
  const Json committed = Json::parse(read_file(truth_folder / "truth.json"));
  ASSERT_EQ(committed["frames"].size(), scene.frames.size());
  for (const std::size_t f : {16U, 30U}) {
    const RenderedFrame frame = render(scene, f, 2);
    const std::string file = read_file(datasets / "quay" / frame.truth.image);
    EXPECT_TRUE(
        std::equal(file.begin(),
                   file.end(),
                   frame.jpeg.begin(),
                   frame.jpeg.end(),
                   [](char a, unsigned char b) { return static_cast<unsigned char>(a) == b; }))
        << frame.truth.image << ": run datasets/make-quay and look at what changed";
    const Json now = Json::parse(truth_json(scene, {frame.truth}));
    EXPECT_EQ(now["rig"], committed["rig"]);
    EXPECT_EQ(now["ranges"], committed["ranges"]);
    EXPECT_EQ(now["frames"][0], committed["frames"][f]);
    const cv::Mat classes = cv::imread(
        (truth_folder / map_file(frame.truth.image, "classes")).string(), cv::IMREAD_GRAYSCALE);
    ASSERT_EQ(classes.size(), frame.truth.classes.size());
    EXPECT_EQ(cv::norm(classes, frame.truth.classes, cv::NORM_INF), 0.0);
  }
}

}  // namespace
}  // namespace rondel::scene
