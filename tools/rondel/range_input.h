#pragma once

#include <vector>

#include "calib/range/fit.h"
#include "tools/rondel/workspace.h"

namespace rondel::app {

/// What the range fit is given: rig, marks with their heights and noise, and what the centre step
/// found. InputError where the centre step has not been run though it could have been.
[[nodiscard]] range::FitInput range_input(const Workspace& workspace,
                                          const std::vector<Mark>& marks);

}  // namespace rondel::app
