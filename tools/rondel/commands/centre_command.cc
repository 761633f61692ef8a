#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome centre_command(const Arguments& arguments, Progress& progress) {
  return centre_step(open_workspace(arguments.words.at(0)), progress);
}

}  // namespace rondel::app
