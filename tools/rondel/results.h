#pragma once

#include <filesystem>
#include <string>
#include <string_view>
#include <utility>
#include <vector>

#include "tools/rondel/workspace.h"

namespace rondel::app {

/// What a result was made from: input name ("frames", "marks.csv", "venue.yaml: link",
/// "results/range.yaml") and the SHA-256 of its content, in a fixed order.
using MadeFrom = std::vector<std::pair<std::string, std::string>>;

/// The inputs that step `step` would be made from now. Only those parts of venue.yaml that the step
/// reads are in it, so that a new baud rate does not redo the colours.
[[nodiscard]] MadeFrom inputs_of(const Workspace& workspace, std::string_view step);

/// Appends a `made_from:` map to a result's YAML text; every results/*.yaml ends with it.
[[nodiscard]] std::string with_made_from(std::string yaml, const MadeFrom& made_from);

enum class Freshness { missing, stale, fresh };
struct StepState {
  Freshness freshness = Freshness::missing;
  std::vector<std::string> changed;  ///< names of the inputs that differ from the record
};
/// Compares the record in the step's result with the inputs of now.
[[nodiscard]] StepState state_of(const Workspace& workspace, std::string_view step);

}  // namespace rondel::app
