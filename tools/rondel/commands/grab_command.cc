#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome grab_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "grab: not built yet");
}

}  // namespace rondel::app
