#pragma once

namespace rondel {

/// Quantiles for 0 < p < 1, to 1e-10 relative. Inverted by bisection from the regularised
/// incomplete gamma and beta functions (series and continued fraction; Abramowitz and Stegun 1964,
/// 6.5 and 26.5).
[[nodiscard]] double normal_quantile(double p);
[[nodiscard]] double chi_square_quantile(double p, double degrees);
[[nodiscard]] double student_quantile(double p, double degrees);
/// P(chi-square with `degrees` > x), x >= 0.
[[nodiscard]] double chi_square_tail(double x, double degrees);
/// P(F > x) for Fisher's F with (d1, d2) degrees of freedom, x >= 0.
[[nodiscard]] double fisher_tail(double x, double d1, double d2);

}  // namespace rondel
