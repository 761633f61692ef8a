#include "calib/base/distribution.h"

#include <cassert>
#include <cmath>
#include <initializer_list>

namespace rondel {
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

}  // namespace rondel
