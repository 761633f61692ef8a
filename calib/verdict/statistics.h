#pragma once

#include <optional>
#include <span>

#include "calib/base/distribution.h"

namespace rondel::verdict {

struct Interval {
  double low = 0.0;
  double high = 0.0;
};

/// Two-sided confidence of every interval in this room.
inline constexpr double kConfidence = 0.95;

using rondel::chi_square_quantile;
using rondel::chi_square_tail;
using rondel::fisher_tail;
using rondel::normal_quantile;
using rondel::student_quantile;

// ---- estimates -------------------------------------------------------------------------------

/// Score interval of a proportion (Wilson 1927). Trials 0: no answer.
[[nodiscard]] std::optional<Interval> wilson(int hits, int trials);

/// No answer for an empty list.
[[nodiscard]] std::optional<double> mean(std::span<const double> values);
[[nodiscard]] std::optional<double> root_mean_square(std::span<const double> values);
/// Linear between order statistics, h = (n - 1) p + 1 (type 7 of Hyndman and Fan 1996).
[[nodiscard]] std::optional<double> percentile(std::span<const double> values, double p);

/// Student's interval of the mean; assumes independent values of one roughly normal kind. Fewer
/// than two values: no answer.
[[nodiscard]] std::optional<Interval> mean_interval(std::span<const double> values);
/// Chi-square interval of the root mean square of zero-mean normal values.
[[nodiscard]] std::optional<Interval> rms_interval(std::span<const double> values);
/// Distribution-free interval of the p-quantile from two order statistics (binomial; David and
/// Nagaraja 2003, 7.1), the shortest symmetric in rank with at least kConfidence. No answer where
/// so few values cannot bound it from both sides.
[[nodiscard]] std::optional<Interval> percentile_interval(std::span<const double> values, double p);

/// Akaike's criterion with the small-sample correction (Hurvich and Tsai 1989):
/// -2 ln L + 2 k + 2 k (k + 1) / (n - k - 1). No answer where n <= k + 1.
[[nodiscard]] std::optional<double> corrected_criterion(double minus_two_log_likelihood,
                                                        int parameters,
                                                        int values);

}  // namespace rondel::verdict
