#pragma once

#include <filesystem>
#include <memory>
#include <string>

#include "calib/range/fit.h"
#include "calib/range/range_curve.h"

namespace rondel::range {

/// results/range.yaml without its record: the curve, all that is needed to use it, and how it came
/// about.
[[nodiscard]] std::string range_yaml(const FitResult& fit);

/// The curve of a results/range.yaml. InputError where it is missing or not one.
[[nodiscard]] std::shared_ptr<const RangeCurve> read_range_curve(const std::filesystem::path& file);

}  // namespace rondel::range
