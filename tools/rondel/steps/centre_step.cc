#include "calib/base/problem.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

Outcome centre_step(const Workspace& /*workspace*/, Progress& /*progress*/) {
  throw InputError("", "centre: not built yet");
}

}  // namespace rondel::app
