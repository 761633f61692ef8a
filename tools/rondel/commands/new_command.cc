#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome new_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "new: not built yet");
}

}  // namespace rondel::app
