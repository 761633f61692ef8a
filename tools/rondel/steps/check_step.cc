#include "calib/base/problem.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

Outcome check_step(const Workspace& /*workspace*/, Progress& /*progress*/) {
  throw InputError("", "check: not built yet");
}

}  // namespace rondel::app
