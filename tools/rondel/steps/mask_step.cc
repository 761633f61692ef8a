#include "calib/base/problem.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

Outcome mask_step(const Workspace& /*workspace*/, Progress& /*progress*/) {
  throw InputError("", "mask: not built yet");
}

}  // namespace rondel::app
