#pragma once

#include <filesystem>
#include <string>
#include <vector>

#include "calib/colour/choose.h"
#include "calib/colour/threshold_set.h"

namespace rondel::colour {

/// results/colours.yaml without its record, in the 8-bit HSV scale.
[[nodiscard]] std::string sets_yaml(const std::vector<ChosenSet>& sets);

/// The sets of results/colours.yaml, in its order. InputError naming file and line on anything
/// else.
[[nodiscard]] std::vector<ThresholdSet> read_threshold_sets(const std::filesystem::path& path);
/// Everything that is in the file.
[[nodiscard]] std::vector<ChosenSet> read_chosen_sets(const std::filesystem::path& path);

}  // namespace rondel::colour
