#include "calib/base/problem.h"
#include "tools/rondel/commands/command.h"

namespace rondel::app {

Outcome colours_command(const Arguments& arguments, Progress& progress) {
  return colours_step(open_workspace(arguments.words.at(0)), progress);
}

}  // namespace rondel::app
