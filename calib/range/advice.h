#pragma once

#include <functional>
#include <string>
#include <vector>

#include "calib/range/design.h"
#include "calib/range/fit.h"

namespace rondel::range {

/// Where marks could be measured, and what they are for.
struct AdviceInput {
  double near_m = 0.15;  ///< the range that the band must serve
  double far_m = 3.0;
  double room_m = 1e9;   ///< no mark can be measured farther away than this
  double mark_px = 0.5;  ///< noise of a further mark, one standard deviation
  double tape_m = 0.003;
  double height_m = 0.0;  ///< of the marks, and of what the band is for
  ToleranceSpec tolerance;
  std::function<bool(ImagePoint)> visible;  ///< null: everything is
  int count = 1;
  Goal goal = Goal::worst;
};

struct AdvisedMark {
  FloorSpot spot;
  ImagePoint pixel;
  double spread_before = 0.0;  ///< relative standard deviation of range by the goal
  double spread_after = 0.0;
};

struct Advice {
  std::vector<AdvisedMark> marks;  ///< in the order to measure them
  double spread_now = 0.0;         ///< relative standard deviation of range by the goal
  double allowed = 0.0;            ///< that the tolerance leaves for it
  bool enough = false;             ///< the band is inside the tolerance, or marks hardly help now
  std::string why;
};

/// The marks that most lower the largest (G-optimal) or mean (I-optimal) band over the floor from
/// near to far at all bearings that can be seen: greedy, then exchanged, ordered so that each is
/// the best of the rest. InputError where no floor can be seen.
[[nodiscard]] Advice advise(const RangeCurve& curve, const AdviceInput& input);

}  // namespace rondel::range
