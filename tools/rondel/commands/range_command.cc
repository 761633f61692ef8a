#include "tools/rondel/commands/command.h"
#include "tools/rondel/steps/range_step.h"

namespace rondel::app {

Outcome range_command(const Arguments& arguments, Progress& progress) {
  return run_range(open_workspace(arguments.words.at(0)),
                   {arguments.has("--tape"), arguments.value("--model").value_or("")},
                   progress);
}

}  // namespace rondel::app
