#pragma once

#include <opencv2/core.hpp>
#include <vector>

#include "calib/base/geometry.h"
#include "vision/rim/ellipse.h"

namespace rondel::vision {

/// A place where the level changes along a ray.
struct RadialEdge {
  double radius_px = 0.0;  ///< from the rays' common start
  double step = 0.0;  ///< level outside minus inside, grey levels a px; the sign is what counts
};

/// Edges along rays that start at one point, evenly spread over the circle from u's direction
/// towards v's.
struct RadialEdges {
  ImagePoint from;
  std::vector<std::vector<RadialEdge>> rays;  ///< by increasing radius
  std::vector<double> end_px;                 ///< where each ray leaves the image
  double noise = 0.0;                         ///< deviation of a step where nothing changes

  std::vector<double> cos_azimuth;  ///< of each ray
  std::vector<double> sin_azimuth;
};

/// The strongest changes along each ray: at most `most` a ray, each over three times the noise.
/// Steps are averaged over neighbouring rays (normal weights of `spread_rays`), which lifts faint
/// arcs about `from` out of the noise and lowers what is no arc.
///   grey  CV_32FC1, smoothed a little
[[nodiscard]] RadialEdges radial_edges(
    const cv::Mat& grey, ImagePoint from, int rays, int most, double spread_rays);

/// Level at `at` between pixels (bilinear). `at` must be inside by a pixel.
[[nodiscard]] double level_at(const cv::Mat& grey, ImagePoint at);

/// Places of changing level near an ellipse, along rays from its centre, to a fraction of a pixel
/// (parabola through the derivative's magnitudes).
struct NearEdges {
  ImagePoint from;
  std::vector<std::vector<RadialEdge>> rays;
  std::vector<double>
      start_px;  ///< the ellipse's own radius on each ray; negative: not in the image
  std::vector<double> cos_azimuth;
  std::vector<double> sin_azimuth;
};
/// Within `reach_px` of the ellipse, all changes of at least `least_step` grey levels a px.
[[nodiscard]] NearEdges edges_near(const cv::Mat& grey,
                                   const Ellipse& ellipse,
                                   double reach_px,
                                   double least_step,
                                   int rays,
                                   double spread_rays);

}  // namespace rondel::vision
