#pragma once

#include <array>
#include <optional>
#include <string>
#include <vector>

#include "calib/base/geometry.h"

namespace rondel {

/// An observed image point with its covariance, px^2, order u, v.
struct ObservedPoint {
  ImagePoint at;
  std::array<double, 3> cov_px2 = {0.0, 0.0, 0.0};  ///< uu, uv, vv
};

/// The rim's ellipse: semi-axes a >= b, `angle_rad` from u's direction towards v's.
struct RimEllipse {
  double a_px = 0.0;
  double b_px = 0.0;
  double angle_rad = 0.0;
};

/// results/centre.yaml: what the centre step found, or what venue.yaml gave in its place.
struct CentreResult {
  ObservedPoint centre;                     ///< centre of the rim's ellipse
  std::optional<RimEllipse> rim;            ///< absent when given by hand without one
  std::optional<ObservedPoint> reflection;  ///< centre of the camera's own reflection
  std::optional<ObservedPoint> turning;     ///< centre about which the ring turns
  int frames_used = 0;
  bool frames_disagree = false;
};

}  // namespace rondel
