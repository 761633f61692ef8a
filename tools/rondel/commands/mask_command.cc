#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome mask_command(const Arguments& arguments, Progress& progress) {
  return mask_step(open_workspace(arguments.words.at(0)), progress);
}

}  // namespace rondel::app
