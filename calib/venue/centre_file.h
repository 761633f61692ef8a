#pragma once

#include <filesystem>
#include <string>

#include "calib/venue/centre_result.h"

namespace rondel {

/// results/centre.yaml as text, without its record of what it was made from. Numbers keep all their
/// digits: read_centre gives back the same values.
[[nodiscard]] std::string centre_yaml(const CentreResult& result);

/// Reads results/centre.yaml. InputError naming the file where it is missing or damaged.
[[nodiscard]] CentreResult read_centre(const std::filesystem::path& path);

}  // namespace rondel
