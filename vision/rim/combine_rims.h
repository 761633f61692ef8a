#pragma once

#include <optional>
#include <span>
#include <vector>

#include "vision/rim/find_rim.h"

namespace rondel::vision {

/// One rim from many frames' rims.
struct CombinedRims {
  CentreResult result;  ///< frames_used: those that agree
  double radius_sd_px = 0.0;
  double scatter_px = 0.0;       ///< deviation of a frame's centre from the common one, per axis
  std::vector<bool> agrees;      ///< per rim given
  double largest_move_px = 0.0;  ///< between the two halves' centres where frames disagree
};

/// Weighted by each frame's covariance, about the median so that a few wrong rims do no harm;
/// frames off by more than their deviations allow are left out. Errors that frames share do not
/// average away: the result's deviation never falls below that part. Frames disagree when more than
/// a quarter is left out, or when first and last frames stand apart: the mirror moved.
///   rims  at least one, in the order of capture
[[nodiscard]] CombinedRims combine_rims(std::span<const Rim> rims);

}  // namespace rondel::vision
