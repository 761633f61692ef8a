#include "calib/base/problem.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

Outcome colours_step(const Workspace& /*workspace*/, Progress& /*progress*/) {
  throw InputError("", "colours: not built yet");
}

}  // namespace rondel::app
