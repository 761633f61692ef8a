#pragma once

#include <filesystem>
#include <optional>

#include "calib/base/progress.h"
#include "tools/rondel/steps/check_batch.h"
#include "tools/rondel/steps/step.h"

namespace rondel::app {

/// Ways to run the check other than on the venue's own frames, all at once.
struct CheckOptions {
  std::optional<std::filesystem::path> batch;  ///< another folder's frames/ and tape.csv
  std::optional<Shard> shard;                  ///< look at a part only and keep what was seen
  bool merge = false;                          ///< join the shards' results instead of looking
  bool repair = false;                         ///< try to mend the diagnosed cause
};

/// The check step with options. Results go to the results/ of the folder whose frames are checked:
/// check.json, check.csv, check.xml, or check-shard-I-of-N.json of a shard; of a batch also its own
/// report.html. Bad input: InputError, nothing written.
Outcome run_check(const Workspace& workspace, const CheckOptions& options, Progress& progress);

}  // namespace rondel::app
