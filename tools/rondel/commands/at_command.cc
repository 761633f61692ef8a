#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome at_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "at: not built yet");
}

}  // namespace rondel::app
