#pragma once

#include <opencv2/core.hpp>
#include <optional>
#include <vector>

#include "calib/venue/centre_result.h"
#include "calib/venue/spec.h"

namespace rondel::vision {

struct RimSearch {
  /// The rim's radius in px where a drawing says so; circles more than four deviations and 12 %
  /// away are not considered.
  std::optional<Uncertain> radius_px;
};

/// The mirror's rim in one frame.
struct Rim {
  ObservedPoint centre;
  RimEllipse ellipse;
  double radius_sd_px = 0.0;
  double edge_noise_px = 0.0;  ///< deviation of a single edge point from the ellipse
  double seen = 0.0;           ///< share of the circumference with an edge on the ellipse
  std::optional<ObservedPoint> reflection;  ///< centre of the camera's own reflection
  double reflection_radius_px = 0.0;
};

/// Finds the rim: the outermost circle about which the level changes, on at least half of its
/// circumference, at most 40 % of it hidden or outside the image; a dark ring that holds the mirror
/// is told from the mirror. Then its ellipse to a fraction of a pixel from 720 rays.
///   bgr      CV_8UC3 or CV_8UC1, at least 64 x 64
///   none     when no circle has enough edge
///   errors   on rendered frames the centre is within 0.2 px in the median (tests/bench/rim_bench)
[[nodiscard]] std::optional<Rim> find_rim(const cv::Mat& bgr, const RimSearch& search = {});

}  // namespace rondel::vision
