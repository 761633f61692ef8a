#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome run_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "run: not built yet");
}

}  // namespace rondel::app
