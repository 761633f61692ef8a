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

/// The record that a result carries: from the end of a YAML file, or from "made_from" in a JSON
/// file (check.json). Empty where there is none.
[[nodiscard]] MadeFrom made_from_of(const std::filesystem::path& result);

/// A YAML result without its record: what later steps are made from.
[[nodiscard]] std::string_view without_made_from(std::string_view yaml);

/// The steps in the order in which `rondel run` takes them.
[[nodiscard]] const std::vector<std::string>& step_names();

/// The file under results/ that carries the step's record.
[[nodiscard]] std::filesystem::path result_of(const Workspace& workspace, std::string_view step);

enum class Freshness { missing, stale, fresh };
struct StepState {
  Freshness freshness = Freshness::missing;
  std::vector<std::string> changed;  ///< names of the inputs that differ from the record
};
/// Compares the record in the step's result with the inputs of now.
[[nodiscard]] StepState state_of(const Workspace& workspace, std::string_view step);

}  // namespace rondel::app
