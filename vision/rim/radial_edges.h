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

  [[nodiscard]] double azimuth_rad(std::size_t ray) const;
};

/// The strongest changes along each ray: at most `most` a ray, each over three times the noise.
///   grey  CV_32FC1, smoothed a little
[[nodiscard]] RadialEdges radial_edges(const cv::Mat& grey, ImagePoint from, int rays, int most);

/// Level at `at` between pixels (bilinear). `at` must be inside by a pixel.
[[nodiscard]] double level_at(const cv::Mat& grey, ImagePoint at);

/// For each of `rays` azimuths about the ellipse's centre the strongest change of level within
/// `reach_px` of the ellipse, to a fraction of a pixel (parabola through the derivative's
/// magnitudes). Rays without one, or whose window leaves the image, have no point.
struct EdgePoint {
  ImagePoint at;
  double azimuth_rad = 0.0;
  double step = 0.0;  ///< as in RadialEdge
};
[[nodiscard]] std::vector<EdgePoint> edges_near(
    const cv::Mat& grey, const Ellipse& ellipse, double reach_px, int rays, double least_step);

}  // namespace rondel::vision
