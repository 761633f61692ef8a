#include "tools/rondel/results.h"

namespace rondel::app {

MadeFrom inputs_of(const Workspace& /*workspace*/, std::string_view /*step*/) { return {}; }
std::string with_made_from(std::string yaml, const MadeFrom& /*made_from*/) { return yaml; }
StepState state_of(const Workspace& /*workspace*/, std::string_view /*step*/) { return {}; }

}  // namespace rondel::app
