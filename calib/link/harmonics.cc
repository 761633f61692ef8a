#include "calib/link/harmonics.h"

#include <cmath>

#include "calib/link/normal_equations.h"

namespace rondel::link {
namespace {

/// What is hidden still steadies the fit where nothing is visible.
double weight_of(const Sample& sample) { return sample.visible ? 1.0 : 1e-4; }

/// One row of the fit of a curve, and its weight.
struct CurveRow {
  std::array<double, 4> left{};
  double right = 0.0;
  double weight = 0.0;
};

}  // namespace

SlowPair fit_range_harmonics(
    const std::vector<const Picture*>& pictures, double cu, double cv, double scale, int degree) {
  const int terms = degree + 1;
  NormalEquations normal(2 * terms, 2 * terms);
  for (const Picture* picture : pictures) {
    for (const auto& curve : picture->curves) {
      std::vector<CurveRow> rows;
      CurveRow mean;
      for (const Sample& sample : curve) {
        const double du = sample.u_sub - cu;
        const double dv = sample.v_sub - cv;
        const double d2 = du * du + dv * dv;
        if (d2 < 1.0) continue;
        // A pixel is worth 2 d in d^2.
        CurveRow row{{du, dv, du * d2 / scale, dv * d2 / scale}, -d2, weight_of(sample) / d2};
        for (std::size_t i = 0; i < 4; ++i) mean.left[i] += row.weight * row.left[i];
        mean.right += row.weight * row.right;
        mean.weight += row.weight;
        rows.push_back(row);
      }
      // The curve's own number is its weighted mean: it drops out with the means.
      for (const CurveRow& row : rows) {
        std::vector<std::pair<int, double>> left;
        for (int i = 0; i < 2 * terms; ++i) {
          left.emplace_back(i, row.left[zu(i)] - mean.left[zu(i)] / mean.weight);
        }
        normal.add(left, {row.right - mean.right / mean.weight, 0.0}, row.weight);
      }
    }
  }
  const auto x = normal.solve();
  SlowPair out{};
  for (int p = 0; p < terms; ++p) {
    out[0][zu(p)] = x[zu(2 * p)][0];
    out[1][zu(p)] = x[zu(2 * p + 1)][0];
  }
  return out;
}

BearingFit fit_bearing_harmonics(const std::vector<const Picture*>& pictures,
                                 const Turn& turn,
                                 double cu,
                                 double cv,
                                 double scale,
                                 bool with_heading) {
  const int unknowns = with_heading ? 5 : 4;
  NormalEquations normal(unknowns, unknowns);
  for (const Picture* picture : pictures) {
    for (const auto& curve : picture->curves) {
      for (const Sample& sample : curve) {
        const double du = sample.u_sub - cu;
        const double dv = sample.v_sub - cv;
        const double d = std::hypot(du, dv);
        if (d < 1.0) continue;
        const double azimuth = turn.azimuth(sample.bearing_rad);
        const double s = std::sin(azimuth);
        const double c = std::cos(azimuth);
        const double slow = d * d / scale;
        const std::array<std::pair<int, double>, 5> row = {std::pair{0, s / d},
                                                           std::pair{1, -c / d},
                                                           std::pair{2, s * slow / d},
                                                           std::pair{3, -c * slow / d},
                                                           std::pair{4, 1.0}};
        normal.add(
            std::span(row).first(zu(unknowns)), {(dv * c - du * s) / d, 0.0}, weight_of(sample));
      }
    }
  }
  const auto x = normal.solve();
  BearingFit fit;
  fit.displacement = {{{x[0][0], x[2][0]}, {x[1][0], x[3][0]}}};
  if (with_heading) fit.azimuth_off_rad = x[4][0];
  return fit;
}

Turn find_turn(const std::vector<const Picture*>& pictures, double cu, double cv) {
  double best = -1.0;
  Turn turn;
  for (const bool mirrored : {true, false}) {
    double c = 0.0;
    double s = 0.0;
    for (const Picture* picture : pictures) {
      for (const auto& curve : picture->curves) {
        for (const Sample& sample : curve) {
          const double azimuth = std::atan2(sample.v_sub - cv, sample.u_sub - cu);
          const double heading =
              mirrored ? sample.bearing_rad - azimuth : sample.bearing_rad + azimuth;
          c += std::cos(heading);
          s += std::sin(heading);
        }
      }
    }
    if (std::hypot(c, s) <= best) continue;
    best = std::hypot(c, s);
    turn = {mirrored, std::atan2(s, c)};
  }
  return turn;
}

}  // namespace rondel::link
