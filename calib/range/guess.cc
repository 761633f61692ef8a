#include "calib/range/guess.h"

#include <fmt/format.h>

#include <Eigen/Cholesky>
#include <cmath>

#include "calib/range/observation.h"

namespace rondel::range {
namespace {

/// How far, in standard deviations squared, a mark would be off with another tape reading.
double misfit(MarkInput mark,
              double range_m,
              std::optional<double> bearing_rad,
              const RangeCurve& curve,
              double noise_scale) {
  mark.range_m = range_m;
  mark.bearing_rad = bearing_rad;
  const auto linear = observe_mark(mark, noise_scale)->linear(curve.model(), curve.params());
  if (!linear) return std::numeric_limits<double>::infinity();
  const Eigen::MatrixXd total =
      linear->covariance + linear->by_params * curve.covariance() * linear->by_params.transpose();
  return linear->residual.dot(total.ldlt().solve(linear->residual));
}

struct Story {
  double factor;      // on the range
  double turn_rad;    // added to the bearing
  bool flip = false;  // the bearing's sign
  const char* text;
};
constexpr double kHalfTurn = std::numbers::pi;
constexpr Story kStories[] = {
    {0.01, 0.0, false, "the range may be in centimetres"},
    {0.001, 0.0, false, "the range may be in millimetres"},
    {100.0, 0.0, false, "the range may have been divided by 100"},
    {0.1, 0.0, false, "the decimal point may be one place off"},
    {10.0, 0.0, false, "the decimal point may be one place off"},
    {1.0, 0.0, true, "the bearing's sign may be turned"},
    {1.0, kHalfTurn, false, "the bearing may be measured from the back"},
    {1.0, 0.5 * kHalfTurn, false, "the bearing may be a quarter turn off"},
    {1.0, -0.5 * kHalfTurn, false, "the bearing may be a quarter turn off"},
};
constexpr double kAgrees = 9.21;  // chi-square, two values, 99 %

}  // namespace

std::vector<Flagged> flagged_marks(const FitInput& input,
                                   const RangeCurve& curve,
                                   const std::vector<MarkResidual>& residuals,
                                   double noise_scale) {
  std::vector<Flagged> list;
  for (const MarkResidual& r : residuals) {
    if (!r.flagged) continue;
    const MarkInput& mark = input.marks[static_cast<std::size_t>(r.mark)];
    Flagged f;
    f.mark = r.mark;
    f.studentised = r.studentised;
    f.p = std::exp(-0.5 * r.studentised * r.studentised);
    if (const auto spot = curve.floor_at(mark.pixel, mark.height_m)) {
      f.range_error_m = mark.range_m - spot->range_m;
      if (mark.bearing_rad) f.bearing_error_rad = wrap_angle(*mark.bearing_rad - spot->bearing_rad);
    }
    double best = kAgrees;
    for (const Story& story : kStories) {
      if (!mark.bearing_rad && (story.flip || story.turn_rad != 0.0)) continue;
      std::optional<double> bearing = mark.bearing_rad;
      if (bearing) bearing = wrap_angle((story.flip ? -*bearing : *bearing) + story.turn_rad);
      const double d = misfit(mark, mark.range_m * story.factor, bearing, curve, noise_scale);
      if (d < best) {
        best = d;
        f.guess = story.text;
      }
    }
    for (const MarkResidual& other : residuals) {
      if (!other.flagged || other.mark == r.mark) continue;
      const MarkInput& twin = input.marks[static_cast<std::size_t>(other.mark)];
      const double there = misfit(mark, twin.range_m, twin.bearing_rad, curve, noise_scale);
      const double back = misfit(twin, mark.range_m, mark.bearing_rad, curve, noise_scale);
      if (std::max(there, back) < best) {
        best = std::max(there, back);
        f.guess = fmt::format("swapped with the mark of line {}", twin.line);
      }
    }
    list.push_back(std::move(f));
  }
  return list;
}

}  // namespace rondel::range
