#include "tools/rondel/commands/command.h"
#include "tools/rondel/help.h"

namespace rondel::app {

Outcome completion_command(const Arguments& arguments, Progress& /*progress*/) {
  const std::string shell = arguments.words.at(0);
  Outcome outcome;
  outcome.summary = completion_script(shell);
  outcome.document = {{"shell", shell}, {"script", outcome.summary}};
  return outcome;
}

}  // namespace rondel::app
