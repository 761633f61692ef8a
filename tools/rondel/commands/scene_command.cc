#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome scene_command(const Arguments& /*arguments*/, Progress& /*progress*/) {
  throw InputError("", "scene: not built yet");
}

}  // namespace rondel::app
