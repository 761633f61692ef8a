#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome advise_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "advise: not built yet");
}

}  // namespace rondel::app
