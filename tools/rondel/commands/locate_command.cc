#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome locate_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "locate: not built yet");
}

}  // namespace rondel::app
