#include "tools/rondel/workspace.h"

#include "calib/base/problem.h"

namespace rondel::app {

Workspace open_workspace(const std::filesystem::path& folder) {
  throw InputError(folder.string(), "not built yet");
}

}  // namespace rondel::app
