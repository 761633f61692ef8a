#pragma once

#include <vector>

#include "calib/range/fit.h"

namespace rondel::range {

/// The marks of `residuals` that were set aside, each with what may have happened: centimetres
/// written as metres, a sign turned, two rows swapped, and the like, where that would make the mark
/// agree with the others.
[[nodiscard]] std::vector<Flagged> flagged_marks(const FitInput& input,
                                                 const RangeCurve& curve,
                                                 const std::vector<MarkResidual>& residuals,
                                                 double noise_scale);

}  // namespace rondel::range
