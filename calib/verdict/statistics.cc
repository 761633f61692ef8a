#include "calib/verdict/statistics.h"

#include <algorithm>
#include <cassert>
#include <cmath>
#include <vector>

namespace rondel::verdict {
namespace {

std::vector<double> sorted(std::span<const double> values) {
  std::vector<double> out(values.begin(), values.end());
  std::sort(out.begin(), out.end());
  return out;
}

/// ln of the binomial coefficient.
double log_choose(int n, int k) {
  return std::lgamma(n + 1.0) - std::lgamma(k + 1.0) - std::lgamma(n - k + 1.0);
}

}  // namespace

std::optional<Interval> wilson(int hits, int trials) {
  assert(hits >= 0 && hits <= trials);
  if (trials == 0) return std::nullopt;
  const double z = normal_quantile(0.5 + 0.5 * kConfidence);
  const double n = trials;
  const double share = hits / n;
  const double middle = (share + z * z / (2.0 * n)) / (1.0 + z * z / n);
  const double half =
      z / (1.0 + z * z / n) * std::sqrt(share * (1.0 - share) / n + z * z / (4.0 * n * n));
  // Exactly 0 and 1 at the ends, where rounding would leave a trace.
  return Interval{hits == 0 ? 0.0 : middle - half, hits == trials ? 1.0 : middle + half};
}

std::optional<double> mean(std::span<const double> values) {
  if (values.empty()) return std::nullopt;
  double sum = 0.0;
  for (const double v : values) sum += v;
  return sum / static_cast<double>(values.size());
}

std::optional<double> root_mean_square(std::span<const double> values) {
  if (values.empty()) return std::nullopt;
  double sum = 0.0;
  for (const double v : values) sum += v * v;
  return std::sqrt(sum / static_cast<double>(values.size()));
}

std::optional<double> percentile(std::span<const double> values, double p) {
  assert(p >= 0.0 && p <= 1.0);
  if (values.empty()) return std::nullopt;
  const std::vector<double> order = sorted(values);
  const double place = p * static_cast<double>(order.size() - 1);
  const auto below = static_cast<std::size_t>(place);
  const std::size_t above = std::min(below + 1, order.size() - 1);
  return order[below] + (place - static_cast<double>(below)) * (order[above] - order[below]);
}

std::optional<Interval> mean_interval(std::span<const double> values) {
  if (values.size() < 2) return std::nullopt;
  const double centre = *mean(values);
  const auto n = static_cast<double>(values.size());
  double sum = 0.0;
  for (const double v : values) sum += (v - centre) * (v - centre);
  const double half =
      student_quantile(0.5 + 0.5 * kConfidence, n - 1.0) * std::sqrt(sum / (n - 1.0) / n);
  return Interval{centre - half, centre + half};
}

std::optional<Interval> rms_interval(std::span<const double> values) {
  if (values.size() < 2) return std::nullopt;
  const auto n = static_cast<double>(values.size());
  const double square_sum = n * std::pow(*root_mean_square(values), 2);
  return Interval{std::sqrt(square_sum / chi_square_quantile(0.5 + 0.5 * kConfidence, n)),
                  std::sqrt(square_sum / chi_square_quantile(0.5 - 0.5 * kConfidence, n))};
}

std::optional<Interval> percentile_interval(std::span<const double> values, double p) {
  const int n = static_cast<int>(values.size());
  if (n == 0) return std::nullopt;
  // P(X(low) <= quantile <= X(high)) = P(low <= B < high), B binomial(n, p), ranks from 1.
  std::vector<double> below(static_cast<std::size_t>(n) + 1);  // P(B <= k)
  double sum = 0.0;
  for (int k = 0; k <= n; ++k) {
    sum += std::exp(log_choose(n, k) + k * std::log(p) + (n - k) * std::log1p(-p));
    below[static_cast<std::size_t>(k)] = std::min(sum, 1.0);
  }
  const double side = 0.5 - 0.5 * kConfidence;
  int low = 0;  // the largest rank with P(B < low) <= side
  while (low + 1 <= n && below[static_cast<std::size_t>(low)] <= side) ++low;
  int high = n + 1;  // the smallest rank with P(B >= high) <= side
  while (high - 1 >= 1 && 1.0 - below[static_cast<std::size_t>(high - 2)] <= side) --high;
  if (low < 1 || high > n) return std::nullopt;
  const std::vector<double> order = sorted(values);
  return Interval{order[static_cast<std::size_t>(low - 1)],
                  order[static_cast<std::size_t>(high - 1)]};
}

std::optional<double> corrected_criterion(double minus_two_log_likelihood,
                                          int parameters,
                                          int values) {
  if (values <= parameters + 1) return std::nullopt;
  const double k = parameters;
  const double n = values;
  return minus_two_log_likelihood + 2.0 * k + 2.0 * k * (k + 1.0) / (n - k - 1.0);
}

}  // namespace rondel::verdict
