#pragma once

#include <algorithm>
#include <array>
#include <cmath>
#include <numbers>
#include <opencv2/imgcodecs.hpp>
#include <opencv2/imgproc.hpp>
#include <random>
#include <string>
#include <vector>

#include "vision/scene/render.h"

namespace rondel::trials {

/// What makes the rim hard to see in a trial.
enum class Trouble {
  none,
  jpeg,    ///< quality 60
  dark,    ///< no ring holds the mirror, and behind it is a dark hall
  bright,  ///< no ring holds the mirror, and lamps stand behind it
  glare,   ///< scattered light and defocus
  tube,    ///< a clear tube around the mirror, with glints
  noise,   ///< underexposed by two stops
  large,   ///< 640 x 480
  count
};
inline constexpr std::array<const char*, static_cast<std::size_t>(Trouble::count)> kTroubleNames = {
    "none", "jpeg", "dark", "bright", "glare", "tube", "noise", "large"};

struct Trial {
  Trouble trouble = Trouble::none;
  scene::Scene scene;
};

/// A rig drawn at random: tilt to 2 degrees, shift to 8 px, principal point off by up to 6 px.
inline scene::SceneRig random_rig(std::mt19937& random, int scale) {
  const auto draw = [&](double low, double high) {
    return std::uniform_real_distribution<double>(low, high)(random);
  };
  scene::SceneRig rig;
  rig.width_px = 320 * scale;
  rig.height_px = 240 * scale;
  rig.vertex_radius_m = draw(0.032, 0.048);
  rig.conic_constant = draw(-3.2, -1.2);
  rig.rim_radius_m = draw(0.026, 0.034);
  rig.distance_m = draw(0.055, 0.075);
  const double c = 1.0 / rig.vertex_radius_m;
  const double s = rig.rim_radius_m;
  const double sag =
      c * s * s / (1.0 + std::sqrt(1.0 - (1.0 + rig.conic_constant) * c * c * s * s));
  // The rim's radius in the image, from well inside the picture to a little cut by its border.
  const double radius_px = draw(88.0, 116.0) * scale;
  rig.focal_px = radius_px * (rig.distance_m + sag) / s;
  rig.principal_du_px = draw(-6.0, 6.0) * scale;
  rig.principal_dv_px = draw(-6.0, 6.0) * scale;
  const double shift_px = draw(0.0, 8.0) * scale;
  const double towards = draw(0.0, 2.0 * std::numbers::pi);
  const double m_per_px = rig.distance_m / rig.focal_px;
  rig.shift_x_m = shift_px * std::cos(towards) * m_per_px;
  rig.shift_y_m = shift_px * std::sin(towards) * m_per_px;
  const double tilt = draw(0.0, 2.0) * kRadPerDeg;
  const double low_side = draw(0.0, 2.0 * std::numbers::pi);
  rig.tilt_x_rad = tilt * std::cos(low_side);
  rig.tilt_y_rad = tilt * std::sin(low_side);
  rig.eye_height_m = draw(0.14, 0.20);
  rig.heading_rad = draw(-3.1, 3.1);
  return rig;
}

/// Trial `index`, with `frames` frames, all in one light. The same everywhere.
inline Trial make_trial(unsigned index, int frames) {
  Trial trial;
  trial.trouble = static_cast<Trouble>(index % static_cast<unsigned>(Trouble::count));
  std::mt19937 random(7919U * index + 13U);
  const int scale = trial.trouble == Trouble::large ? 2 : 1;
  const scene::SceneRig rig = random_rig(random, scale);
  trial.scene = scene::practice_scene(rig, 1000U + index, frames);
  scene::Scene& s = trial.scene;
  const std::size_t light = index / static_cast<unsigned>(Trouble::count) % s.lights.size();
  std::erase_if(s.frames, [&](const scene::SceneFrame& f) { return f.light != light; });
  s.sensor.supersample = 2;
  switch (trial.trouble) {
    case Trouble::jpeg:
      s.sensor.jpeg_quality = 60;
      break;
    case Trouble::dark:
      s.robot.holder_radius_m = 0.0;
      s.hall.ceiling.albedo = {0.02, 0.02, 0.02};
      break;
    case Trouble::bright: {
      s.robot.holder_radius_m = 0.0;
      scene::Lamp lamp = s.lights[light].lamps.front();
      for (const double x : {-0.8, 0.1, 0.9}) {
        lamp.at = {x, 0.5 * x, 2.8};
        s.lights[light].lamps.push_back(lamp);
      }
      break;
    }
    case Trouble::glare:
      s.sensor.glare = 0.08;
      s.sensor.defocus_px = 1.2;
      break;
    case Trouble::noise:
      s.lights[light].stops = -2.0;
      break;
    default:
      break;
  }
  return trial;
}

/// Glints and a faint outline of a tube 13 % wider than the rim, over a finished picture.
inline void add_tube(cv::Mat& bgr, const scene::ImagedRim& rim) {
  const cv::Point middle(cvRound(rim.centre.u_px * 16), cvRound(rim.centre.v_px * 16));
  const double r = 1.13 * rim.ellipse.a_px;
  const int radius = cvRound(r * 16);
  cv::Mat layer = bgr.clone();
  cv::circle(layer, middle, radius, {150, 150, 150}, 2, cv::LINE_AA, 4);
  cv::addWeighted(layer, 0.4, bgr, 0.6, 0.0, bgr);
  for (const int from : {20, 200}) {
    std::vector<cv::Point> arc;
    for (int deg = from; deg <= from + 35; deg += 3) {
      const double t = deg * kRadPerDeg;
      arc.emplace_back(cvRound((rim.centre.u_px + 0.985 * r * std::cos(t)) * 16),
                       cvRound((rim.centre.v_px + 0.985 * r * std::sin(t)) * 16));
    }
    const std::vector<std::vector<cv::Point>> arcs = {arc};
    cv::polylines(bgr, arcs, false, {245, 245, 245}, 3, cv::LINE_AA, 4);
  }
}

/// Frame `index` of the trial as a camera would deliver it.
inline scene::RenderedFrame render_trial(const Trial& trial, std::size_t index, int threads) {
  scene::RenderedFrame frame = scene::render(trial.scene, index, threads);
  if (trial.trouble == Trouble::tube) add_tube(frame.bgr, frame.truth.rim);
  return frame;
}

/// Covers `share` of the rim from azimuth `from_rad` on with dark and bright patches: a cable, a
/// hand, a part of the robot in front of the mirror.
inline void hide_rim(cv::Mat& bgr, const scene::ImagedRim& rim, double share, double from_rad) {
  const int steps = 48;
  const double width = 2.0 * std::numbers::pi * share;
  std::vector<cv::Point> patch;
  for (int k = 0; k <= steps; ++k) {
    const double t = from_rad + width * k / steps;
    const double r = (k % 6 < 3 ? 0.84 : 0.90) * rim.ellipse.a_px;
    patch.emplace_back(cvRound(rim.centre.u_px + r * std::cos(t)),
                       cvRound(rim.centre.v_px + r * std::sin(t)));
  }
  for (int k = steps; k >= 0; --k) {
    const double t = from_rad + width * k / steps;
    const double r = (k % 8 < 4 ? 1.1 : 1.25) * rim.ellipse.a_px;
    patch.emplace_back(cvRound(rim.centre.u_px + r * std::cos(t)),
                       cvRound(rim.centre.v_px + r * std::sin(t)));
  }
  const std::vector<std::vector<cv::Point>> patches = {patch};
  cv::fillPoly(bgr, patches, {70, 60, 55}, cv::LINE_8);
}

}  // namespace rondel::trials
