#pragma once

#include <string>

#include "calib/base/progress.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

struct RangeOptions {
  bool tape = false;  ///< marks from tape rows whose object is found; every second row held out
  std::string model;  ///< full name; empty: the best
};

/// The range step with options.
Outcome run_range(const Workspace& workspace, const RangeOptions& options, Progress& progress);

}  // namespace rondel::app
