#include "calib/base/problem.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

Outcome tables_step(const Workspace& /*workspace*/, Progress& /*progress*/) {
  throw InputError("", "tables: not built yet");
}

}  // namespace rondel::app
