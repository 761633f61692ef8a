#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <string>
#include <string_view>
#include <vector>

#include "calib/base/geometry.h"
#include "calib/venue/centre_result.h"
#include "vision/scene/scene.h"
#include "vision/scene/truth_trace.h"

namespace rondel::scene {

/// What a pixel's centre shows.
enum class PixelClass : unsigned char {
  beyond = 0,  ///< outside the rim: hall, holder, posts, seen without the mirror
  hole = 1,    ///< the camera's own reflection
  robot = 2,   ///< plate, posts, body in the mirror
  floor = 3,
  wall = 4,  ///< boards, hall walls, ceiling, lamps, windows
  object = 5,
  scenery = 6  ///< things on the floor without a name
};

/// Truth of one named object in one frame.
struct ObjectTruth {
  std::size_t object = 0;  ///< index into Scene::objects
  std::string name;
  FloorSpot spot;                ///< of what is measured: a ball's centre, else the near foot
  FloorSpot middle;              ///< of its centre
  double height_m = 0.0;         ///< above the floor of what is measured: a ball's radius, else 0
  std::optional<ImagePoint> at;  ///< where `spot` at that height appears; none outside the rim
  double area_px = 0.0;          ///< visible, counted in fractions of pixels; 0: hidden
  double hidden_fraction = 0.0;  ///< of its area inside the rim, hidden behind body or things
  std::optional<ImagePoint> centroid;  ///< of the visible blob
  cv::Rect box_px;                     ///< pixels the blob touches; empty when hidden
};

/// True range along a ray of pixels.
struct RangeSample {
  ImagePoint at;
  double radius_px = 0.0;  ///< from the rim's centre
  FloorSpot spot;          ///< at height 0
};

/// Everything true of one frame.
struct FrameTruth {
  std::string image;
  std::string light;
  Pose pose;
  ImagedRim rim;
  cv::Mat classes;  ///< CV_8U, PixelClass
  cv::Mat objects;  ///< CV_8U, 1 + index into Scene::objects of the named object seen, else 0
  cv::Mat mask;     ///< CV_8U: 255 inside the rim and neither robot nor hole, else 0
  std::vector<ObjectTruth> seen;  ///< every named object, in the scene's order
};

struct RenderedFrame {
  cv::Mat bgr;  ///< CV_8UC3, as the camera delivers it (JPEG and RGB565 losses included)
  std::vector<unsigned char> jpeg;  ///< the file it delivers, where the sensor makes JPEGs
  FrameTruth truth;
};

/// Renders a frame of the scene. The same bits whatever the number of threads.
///   frame    index into scene.frames
///   threads  at least 1
[[nodiscard]] RenderedFrame render(const Scene& scene, std::size_t frame, int threads = 1);

/// Only the truth, without shading (several times faster).
[[nodiscard]] FrameTruth trace_truth(const Scene& scene, std::size_t frame, int threads = 1);

/// True range on rays of pixels every 15 degrees, every `step_px` from the rim's centre outwards.
[[nodiscard]] std::vector<RangeSample> true_ranges(const SceneRig& rig, double step_px = 4.0);

/// Radiance in linear light before the camera's own faults, CV_32FC3 in the order B, G, R; 1.0
/// fills the sensor.
[[nodiscard]] cv::Mat render_linear(const Scene& scene, std::size_t frame, int threads = 1);

/// What the camera makes of that radiance: vignetting, blur, exposure noise, mosaic, white balance,
/// curve, RGB565 (JPEG is render's). `noise_seed` picks the noise.
[[nodiscard]] cv::Mat expose(const cv::Mat& linear_bgr,
                             const Sensor& sensor,
                             const Light& light,
                             std::uint64_t noise_seed);

/// Where a frame's map is kept beside truth.json: map_file("frames/noon/0001.jpg", "classes") is
/// "frames/noon/0001-classes.png". The mask, the same in all frames, is "mask.png".
[[nodiscard]] std::string map_file(const std::string& image, std::string_view what);

/// truth.json: `scene` and the truth of its frames, the maps by the names of their files.
[[nodiscard]] std::string truth_json(const Scene& scene, const std::vector<FrameTruth>& frames);

}  // namespace rondel::scene
