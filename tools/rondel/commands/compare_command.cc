#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome compare_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "compare: not built yet");
}

}  // namespace rondel::app
