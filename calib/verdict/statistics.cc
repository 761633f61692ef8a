#include "calib/verdict/statistics.h"

#include <algorithm>
#include <cassert>
#include <cmath>
#include <vector>

namespace rondel::verdict {
namespace {

constexpr double kTiny = 1e-300;
constexpr double kClose = 1e-15;

/// Regularised lower incomplete gamma function P(a, x) by its series, for x < a + 1.
double gamma_series(double a, double x) {
  double term = 1.0 / a;
  double sum = term;
  for (double n = a + 1.0; std::abs(term) > kClose * std::abs(sum); n += 1.0) {
    term *= x / n;
    sum += term;
  }
  return sum * std::exp(a * std::log(x) - x - std::lgamma(a));
}

/// Regularised upper incomplete gamma function Q(a, x) by its continued fraction (modified Lentz),
/// for x >= a + 1; accurate far into the tail.
double gamma_fraction(double a, double x) {
  double b = x + 1.0 - a;
  double c = 1.0 / kTiny;
  double d = 1.0 / b;
  double h = d;
  for (int i = 1; i < 10000; ++i) {
    const double an = -i * (i - a);
    b += 2.0;
    d = an * d + b;
    if (std::abs(d) < kTiny) d = kTiny;
    c = b + an / c;
    if (std::abs(c) < kTiny) c = kTiny;
    d = 1.0 / d;
    h *= d * c;
    if (std::abs(d * c - 1.0) < kClose) break;
  }
  return h * std::exp(a * std::log(x) - x - std::lgamma(a));
}

double gamma_lower(double a, double x) {
  if (x <= 0.0) return 0.0;
  return x < a + 1.0 ? gamma_series(a, x) : 1.0 - gamma_fraction(a, x);
}

double gamma_upper(double a, double x) {
  if (x <= 0.0) return 1.0;
  return x < a + 1.0 ? 1.0 - gamma_series(a, x) : gamma_fraction(a, x);
}

/// Regularised incomplete beta function I_x(a, b).
double beta_regular(double a, double b, double x) {
  if (x <= 0.0) return 0.0;
  if (x >= 1.0) return 1.0;
  if (x > (a + 1.0) / (a + b + 2.0)) return 1.0 - beta_regular(b, a, 1.0 - x);
  const double front = std::exp(std::lgamma(a + b) - std::lgamma(a) - std::lgamma(b) +
                                a * std::log(x) + b * std::log1p(-x));
  double c = 1.0;
  double d = 1.0 - (a + b) * x / (a + 1.0);
  if (std::abs(d) < kTiny) d = kTiny;
  d = 1.0 / d;
  double h = d;
  for (int m = 1; m < 10000; ++m) {
    const double even = m * (b - m) * x / ((a + 2.0 * m - 1.0) * (a + 2.0 * m));
    const double odd = -(a + m) * (a + b + m) * x / ((a + 2.0 * m) * (a + 2.0 * m + 1.0));
    double delta = 1.0;
    for (const double term : {even, odd}) {
      d = 1.0 + term * d;
      if (std::abs(d) < kTiny) d = kTiny;
      c = 1.0 + term / c;
      if (std::abs(c) < kTiny) c = kTiny;
      d = 1.0 / d;
      delta = d * c;
      h *= delta;
    }
    if (std::abs(delta - 1.0) < kClose) break;
  }
  return front * h / a;
}

/// The x at which the rising `f` passes `p`, by bisection from [low, high]; `high` is doubled until
/// it lies above.
template <typename F>
double invert(F f, double p, double low, double high) {
  while (f(high) < p) high *= 2.0;
  for (int i = 0; i < 200; ++i) {
    const double middle = 0.5 * (low + high);
    if (middle == low || middle == high) break;
    (f(middle) < p ? low : high) = middle;
  }
  return 0.5 * (low + high);
}

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

double normal_quantile(double p) {
  assert(p > 0.0 && p < 1.0);
  if (p == 0.5) return 0.0;
  if (p < 0.5) return -normal_quantile(1.0 - p);
  return std::sqrt(chi_square_quantile(2.0 * p - 1.0, 1.0));
}

double chi_square_quantile(double p, double degrees) {
  assert(p > 0.0 && p < 1.0 && degrees > 0.0);
  return invert(
      [&](double x) { return gamma_lower(0.5 * degrees, 0.5 * x); }, p, 0.0, degrees + 1.0);
}

double student_quantile(double p, double degrees) {
  assert(p > 0.0 && p < 1.0 && degrees > 0.0);
  if (p == 0.5) return 0.0;
  if (p < 0.5) return -student_quantile(1.0 - p, degrees);
  const auto cumulative = [&](double t) {
    return 1.0 - 0.5 * beta_regular(0.5 * degrees, 0.5, degrees / (degrees + t * t));
  };
  return invert(cumulative, p, 0.0, 2.0);
}

double chi_square_tail(double x, double degrees) {
  return x <= 0.0 ? 1.0 : gamma_upper(0.5 * degrees, 0.5 * x);
}

double fisher_tail(double x, double d1, double d2) {
  return x <= 0.0 ? 1.0 : beta_regular(0.5 * d2, 0.5 * d1, d2 / (d2 + d1 * x));
}

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
