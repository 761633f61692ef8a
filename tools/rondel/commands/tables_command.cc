#include "tools/rondel/commands/command.h"
#include "tools/rondel/steps/tables_step.h"

namespace rondel::app {

Outcome tables_command(const Arguments& arguments, Progress& progress) {
  const Workspace workspace = open_workspace(arguments.words.at(0));
  Outcome outcome = tables_step(workspace, progress);
  if (arguments.has("--verify")) verify_tables(workspace, outcome);
  return outcome;
}

}  // namespace rondel::app
