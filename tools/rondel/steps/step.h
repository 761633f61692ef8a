#pragma once

#include <map>
#include <nlohmann/json.hpp>
#include <string>

#include "calib/base/progress.h"
#include "tools/rondel/workspace.h"

namespace rondel::app {

/// What a step (or command) has to say: one JSON document for programs, a few lines for people.
struct Outcome {
  nlohmann::ordered_json document;
  std::string summary;  ///< a few lines, each number with its unit
  int status = 0;       ///< 0, or 1 for a verdict 'not accepted'
};

// The steps of a venue, each in its own file. A step reads the workspace, writes its files under
// results/ (beside and renamed) and answers. Bad input: InputError, nothing written.
Outcome centre_step(const Workspace& workspace, Progress& progress);
Outcome mask_step(const Workspace& workspace, Progress& progress);
Outcome range_step(const Workspace& workspace, Progress& progress);
Outcome colours_step(const Workspace& workspace, Progress& progress);
Outcome tables_step(const Workspace& workspace, Progress& progress);
Outcome check_step(const Workspace& workspace, Progress& progress);

}  // namespace rondel::app
