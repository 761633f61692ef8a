#include "calib/base/problem.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

Outcome range_step(const Workspace& /*workspace*/, Progress& /*progress*/) {
  throw InputError("", "range: not built yet");
}

}  // namespace rondel::app
