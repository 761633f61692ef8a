#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome where_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "where: not built yet");
}

}  // namespace rondel::app
