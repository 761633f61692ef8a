#pragma once

// Rendered halls with known truth for the colour tests and benchmarks: frames in linear light, and
// what a camera makes of them under lights of all kinds. Shares no formula with calib/colour:
// lights are the CIE's printed chromaticities, the camera is the renderer's.

#include <array>
#include <cmath>
#include <opencv2/imgproc.hpp>
#include <string>
#include <vector>

#include "calib/colour/choose.h"
#include "vision/scene/noise.h"
#include "vision/scene/render.h"
#include "vision/scene/scene.h"

namespace rondel::colour::testing {

inline const std::vector<std::string>& hall_objects() {
  static const std::vector<std::string> kNames = {
      "buoy", "dock_teal", "dock_violet", "float_yellow"};
  return kNames;
}

/// One place of the robot, in linear light.
struct Shot {
  cv::Mat linear;
  scene::FrameTruth truth;
};

/// The practice hall with a fourth object and with distractors: wood, a copper post, a sea-green
/// crate, a slate-blue and a plum box, a straw mat's edge.
inline scene::Scene hall_scene(unsigned seed,
                               int frames,
                               bool daylight_mixed,
                               int supersample = 2) {
  scene::SceneRig rig;
  scene::Scene scene = scene::practice_scene(rig, seed, frames);
  scene.sensor.supersample = supersample;
  const auto thing =
      [&](const std::string& name, scene::Solid solid, FloorPoint at, scene::Vec3 albedo) {
        scene::SceneObject object;
        object.id = "extra_" + std::to_string(scene.objects.size());
        object.name = name;
        object.solid = solid;
        object.at = at;
        object.diameter_m = 0.08;
        object.length_m = 0.16;
        object.width_m = 0.12;
        object.height_m = 0.12;
        object.material = {albedo, 0.2};
        scene.objects.push_back(object);
      };
  const double flip = seed % 2 == 0 ? 1.0 : -1.0;
  thing("float_yellow", scene::Solid::ball, {0.35 * flip, 0.62}, scene::srgb(236, 196, 38));
  thing("float_yellow", scene::Solid::ball, {-0.7 * flip, -0.35}, scene::srgb(236, 196, 38));
  thing("", scene::Solid::box, {1.15, 0.6 * flip}, scene::srgb(164, 116, 70));       // wood
  thing("", scene::Solid::cylinder, {-1.1, 0.55 * flip}, scene::srgb(150, 84, 58));  // copper
  thing("", scene::Solid::box, {0.75 * flip, -0.65}, scene::srgb(96, 140, 128));     // sea green
  thing("", scene::Solid::box, {-0.25, -0.7 * flip}, scene::srgb(70, 90, 124));      // slate blue
  thing("", scene::Solid::box, {-1.2, -0.6 * flip}, scene::srgb(112, 78, 108));      // plum
  thing("", scene::Solid::box, {0.9, 0.05 * flip}, scene::srgb(196, 180, 120));      // straw
  // One light for all: white lamps, or lamps and a window of another colour.
  scene::Light light;
  light.name = daylight_mixed ? "mixed" : "white";
  light.exposure_lux = 900.0;
  light.ambient_lux = 90.0;
  light.ambient_kelvin = 6500.0;
  for (const double x : {-1.2, 1.2}) {
    for (const double y : {-0.9, 1.1}) {
      light.lamps.push_back({{x, y, 2.85}, 0.2, 190.0, daylight_mixed ? 3200.0 : 6500.0});
    }
  }
  if (daylight_mixed) {
    light.ambient_kelvin = 4200.0;
    light.windows.push_back({{-2.6, 3.0}, {2.2, 3.0}, 0.9, 2.3, 700.0, 6800.0});
  }
  scene.lights = {light};
  scene.frames.resize(static_cast<std::size_t>(frames));
  for (scene::SceneFrame& frame : scene.frames) frame.light = 0;
  return scene;
}

inline std::vector<Shot> shoot(unsigned seed,
                               int frames,
                               bool daylight_mixed,
                               int supersample = 2) {
  const scene::Scene scene = hall_scene(seed, frames, daylight_mixed, supersample);
  std::vector<Shot> shots;
  for (std::size_t f = 0; f < scene.frames.size(); ++f) {
    shots.push_back({scene::render_linear(scene, f, 2), scene::trace_truth(scene, f, 2)});
  }
  return shots;
}

/// A lighting condition: what the lamps are, and how the camera stands to them.
struct HallLight {
  std::string name;
  double x = 0.3127;  ///< chromaticity of the lamps over the renderer's white
  double y = 0.3290;
  double stops = 0.0;
  double balance = 1.0;    ///< share of the lamps' colour that the camera takes out; 0: none
  double error_red = 1.0;  ///< what its white balance is off by
  double error_blue = 1.0;
};

/// IEC 61966-2-1 primaries, by Cramer's rule from their chromaticities: linear sRGB of a light.
inline std::array<double, 3> primaries_of(double x, double y) {
  // Columns: X, Y, Z of R, G and B with the white point D65 (0.3127, 0.3290).
  const cv::Matx33d m(0.4124, 0.3576, 0.1805, 0.2126, 0.7152, 0.0722, 0.0193, 0.1192, 0.9505);
  const cv::Vec3d rgb = m.solve(cv::Vec3d(x / y, 1.0, (1.0 - x - y) / y), cv::DECOMP_LU);
  return {std::max(0.02, rgb[0]), std::max(0.02, rgb[1]), std::max(0.02, rgb[2])};
}

/// What the camera makes of a shot in a light.
inline cv::Mat expose(const Shot& shot,
                      const HallLight& light,
                      const scene::Sensor& sensor,
                      std::uint64_t seed) {
  const std::array<double, 3> lamps = primaries_of(light.x, light.y);
  const double red = lamps[0] / lamps[1];
  const double blue = lamps[2] / lamps[1];
  cv::Mat linear = shot.linear.clone();
  const double exposure = std::exp2(light.stops);
  linear.forEach<cv::Vec3f>([&](cv::Vec3f& p, const int*) {
    p = {static_cast<float>(exposure * blue * static_cast<double>(p[0])),
         static_cast<float>(exposure * static_cast<double>(p[1])),
         static_cast<float>(exposure * red * static_cast<double>(p[2]))};
  });
  // The camera's own balance is undone but for what is asked for here.
  scene::Light camera;
  camera.white_kelvin = 6500.0;
  scene::Sensor plain = sensor;
  camera.white_error_red = light.error_red * std::pow(red, -light.balance);
  camera.white_error_blue = light.error_blue * std::pow(blue, -light.balance);
  return scene::expose(linear, plain, camera, seed);
}

/// Pixels whose neighbours above, below and beside are of the same object, by object; and all
/// pixels of the mask at least two pixels away from any object.
struct Truths {
  std::vector<cv::Mat> objects;
  cv::Mat surroundings;
};
inline Truths truths_of(const Shot& shot, const scene::Scene& scene) {
  Truths truths;
  const cv::Mat cross = cv::getStructuringElement(cv::MORPH_CROSS, {3, 3});
  for (const std::string& name : hall_objects()) {
    cv::Mat of_name(shot.truth.objects.size(), CV_8U, cv::Scalar(0));
    for (std::size_t k = 0; k < scene.objects.size(); ++k) {
      if (scene.objects[k].name == name)
        of_name |= shot.truth.objects == static_cast<double>(k + 1);
    }
    cv::erode(of_name, of_name, cross);
    truths.objects.push_back(of_name & shot.truth.mask);
  }
  cv::Mat any;
  cv::dilate(shot.truth.objects, any, cv::getStructuringElement(cv::MORPH_RECT, {5, 5}));
  truths.surroundings = shot.truth.mask & (any == 0);
  return truths;
}

/// Labelled pixels of all shots in one light.
inline LightSamples samples_of(const std::vector<Shot>& shots,
                               const scene::Scene& scene,
                               const HallLight& light,
                               std::uint64_t seed) {
  LightSamples samples;
  samples.light = light.name;
  RgbCounter counter;
  std::vector<cv::Mat> frames;
  std::vector<Truths> truths;
  for (std::size_t k = 0; k < shots.size(); ++k) {
    frames.push_back(expose(shots[k], light, scene.sensor, seed * 1000 + k));
    truths.push_back(truths_of(shots[k], scene));
  }
  const auto add = [&](const cv::Mat& area, const cv::Mat& bgr) {
    for (int v = 0; v < bgr.rows; ++v) {
      for (int u = 0; u < bgr.cols; ++u) {
        if (area.at<unsigned char>(v, u) == 0) continue;
        const auto& p = bgr.at<cv::Vec3b>(v, u);
        counter.add(Rgb{p[2], p[1], p[0]});
      }
    }
  };
  for (std::size_t o = 0; o < hall_objects().size(); ++o) {
    for (std::size_t k = 0; k < shots.size(); ++k) add(truths[k].objects[o], frames[k]);
    samples.objects.push_back(counter.take());
  }
  for (std::size_t k = 0; k < shots.size(); ++k) add(truths[k].surroundings, frames[k]);
  samples.surroundings = counter.take();
  return samples;
}

/// The three lights a venue is set up in.
inline std::vector<HallLight> lights_to_fit(double balance) {
  return {{"D65 noon", 0.31270, 0.32900, 0.3, balance, 1.02, 0.97},
          {"F2 lamps", 0.37210, 0.37510, 0.0, balance, 0.98, 1.03},
          {"4000 K dusk", 0.38053, 0.37673, -0.6, balance, 1.01, 1.02}};
}

/// Lights nobody showed the search. CIE chromaticities, 2 degree observer.
inline std::vector<HallLight> unseen_lights(double balance) {
  return {{"A", 0.44758, 0.40745, 0.5, balance, 0.96, 1.06},
          {"F2 bright", 0.37210, 0.37510, 1.5, balance, 1.04, 0.97},
          {"F11", 0.38050, 0.37690, -0.5, balance, 0.97, 0.96},
          {"F12", 0.43700, 0.40420, -1.0, balance, 1.05, 1.02},
          {"LED-B3", 0.3756, 0.3723, 1.0, balance, 0.98, 1.05},
          {"LED-B4", 0.3422, 0.3502, -1.2, balance, 1.03, 1.03},
          {"LED-B5", 0.3118, 0.3236, 0.8, balance, 0.95, 0.98},
          {"D50", 0.34570, 0.35850, 1.2, balance, 1.03, 0.95},
          {"D65 dark", 0.31270, 0.32900, -1.5, balance, 0.99, 0.96},
          {"D75", 0.29903, 0.31488, 0.0, balance, 1.04, 1.04},
          {"LED-B2", 0.4357, 0.4012, 0.7, balance, 0.97, 0.95},
          {"D75 bright", 0.29903, 0.31488, 1.4, balance, 0.96, 1.0},
          {"F12 dark", 0.43700, 0.40420, -1.4, balance, 1.0, 1.05}};
}

}  // namespace rondel::colour::testing
