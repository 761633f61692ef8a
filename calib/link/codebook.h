#pragma once

#include <functional>
#include <span>
#include <vector>

#include "calib/venue/spec.h"

namespace rondel::link {

/// The ranges that the link's codes stand for. Code k stands for every range from edges_m[k] to
/// edges_m[k + 1] and is read as codes_m[k].
struct Codebook {
  std::vector<double> codes_m;  ///< ascending
  std::vector<double> edges_m;  ///< one more than codes, first near_m, last far_m
  [[nodiscard]] int size() const { return static_cast<int>(codes_m.size()); }
  /// The code of `range_m`; what is nearer than the first edge is code 0, what is farther than the
  /// last edge is the last code.
  [[nodiscard]] int code_of(double range_m) const;
  /// The largest relative error that code `k` makes in its own cell.
  [[nodiscard]] double relative_error(int k) const;
  /// The largest of all cells.
  [[nodiscard]] double worst_relative_error() const;
  /// Root mean square of the relative error for ranges spread evenly over [near, far].
  [[nodiscard]] double rms_relative_error() const;
};

/// What the best book of `codes` codes over [near_m, far_m] cannot beat: its worst relative error
/// tanh(ln(far/near) / (2 codes)).
[[nodiscard]] double relative_bound(double near_m, double far_m, int codes);

/// Least worst relative error: cells of equal ratio, each code the harmonic mean of its ends.
[[nodiscard]] Codebook relative_codebook(double near_m, double far_m, int codes);

/// Least worst absolute error: equal cells, each code their middle.
[[nodiscard]] Codebook absolute_codebook(double near_m, double far_m, int codes);

/// Least weighted mean square error for values with density `weight(x)` (density times the weight
/// of a square error at x; need not be normalised; above 0): Lloyd 1957, Max 1960. Exact by dynamic
/// programming over cells that end on a fine grid (Bruce 1965), then polished off the grid.
[[nodiscard]] Codebook mean_square_codebook(double low,
                                            double high,
                                            int codes,
                                            const std::function<double(double)>& weight);

/// Most information about the range, where a reading carries noise of standard deviation
/// `noise_m(range_m)`: least mean of ln(noise^2 + cell^2 / 12) over ranges spread evenly in their
/// logarithm. Where pixels resolve more than codes it has cells of equal ratio; where noise hides
/// the cells it spends fewer. `noise_m` above 0 and finite over [near_m, far_m].
[[nodiscard]] Codebook noise_matched_codebook(double near_m,
                                              double far_m,
                                              int codes,
                                              const std::function<double(double)>& noise_m);

/// What noise_matched_codebook keeps small: the mean of ln(noise^2 + cell^2 / 12) / 2 over ranges
/// spread evenly in their logarithm.
[[nodiscard]] double mean_log_error(const Codebook& book,
                                    const std::function<double(double)>& noise_m);

/// How many ranges a report can tell apart: two of the 2^range_bits codes are reserved.
[[nodiscard]] constexpr int range_codes(const LinkSpec& link) { return (1 << link.range_bits) - 2; }

/// The book that `link` asks for. `noise_m` is needed by the noise-matched one only.
[[nodiscard]] Codebook make_codebook(const LinkSpec& link,
                                     const std::function<double(double)>& noise_m);

}  // namespace rondel::link
