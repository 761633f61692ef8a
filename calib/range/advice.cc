#include "calib/range/advice.h"

#include <fmt/format.h>

#include <Eigen/Cholesky>
#include <algorithm>
#include <cmath>
#include <numbers>

#include "calib/base/distribution.h"
#include "calib/base/problem.h"

namespace rondel::range {
namespace {

constexpr int kRanges = 14;
constexpr int kBearings = 24;
/// A mark that lowers the band by less than this is not worth the walk.
constexpr double kWorthwhile = 0.03;

struct Cell {
  FloorSpot spot;
  ImagePoint pixel;
};

std::vector<Cell> cells(const RangeCurve& curve, const AdviceInput& input) {
  std::vector<Cell> list;
  for (int i = 0; i < kRanges; ++i) {
    const double range = input.near_m * std::pow(input.far_m / input.near_m, i / (kRanges - 1.0));
    for (int k = 0; k < kBearings; ++k) {
      const FloorSpot spot{range, wrap_angle(2.0 * std::numbers::pi * k / kBearings)};
      const auto pixel = curve.pixel_of(spot, input.height_m);
      if (pixel && (!input.visible || input.visible(*pixel))) list.push_back({spot, *pixel});
    }
  }
  return list;
}

}  // namespace

Advice advise(const RangeCurve& curve, const AdviceInput& input) {
  const std::vector<Cell> floor = cells(curve, input);
  const auto size = curve.params().size();
  Eigen::VectorXd scale(size);
  for (Eigen::Index i = 0; i < size; ++i) {
    scale[i] = curve.model().parameters()[static_cast<std::size_t>(i)].scale;
  }
  DesignProblem problem;
  const Eigen::MatrixXd scaled =
      scale.cwiseInverse().asDiagonal() * curve.covariance() * scale.cwiseInverse().asDiagonal();
  problem.information = scaled.ldlt().solve(Eigen::MatrixXd::Identity(size, size));

  std::vector<Cell> places;
  std::vector<Eigen::RowVectorXd> targets;
  for (const Cell& cell : floor) {
    const auto placed = curve.model().locate(curve.params(), cell.pixel, input.height_m);
    const auto seen = curve.model().project(curve.params(), to_point(cell.spot), input.height_m);
    if (!placed || !seen) continue;
    const double r = cell.spot.range_m;
    targets.emplace_back(
        ((placed->at.x_m * placed->by_params.row(0) + placed->at.y_m * placed->by_params.row(1)) /
         (r * r)) *
        scale.asDiagonal());
    if (r > input.room_m) continue;
    const Eigen::Matrix2d noise =
        input.mark_px * input.mark_px * Eigen::Matrix2d::Identity() +
        input.tape_m * input.tape_m * seen->by_place * seen->by_place.transpose();
    const Eigen::LLT<Eigen::Matrix2d> root(noise);
    problem.candidates.emplace_back(root.matrixL().solve(seen->by_params * scale.asDiagonal()));
    places.push_back(cell);
  }
  if (targets.empty()) {
    throw InputError("rondel advise", "no floor between near_m and far_m can be seen");
  }
  if (places.empty()) {
    throw InputError("rondel advise", "no floor that can be seen lies within the room to measure");
  }
  problem.targets.resize(static_cast<Eigen::Index>(targets.size()), size);
  for (std::size_t i = 0; i < targets.size(); ++i) {
    problem.targets.row(static_cast<Eigen::Index>(i)) = targets[i];
  }

  Advice advice;
  advice.spread_now = spread_after(problem, {}, input.goal);
  advice.allowed = input.tolerance.range_relative / normal_quantile(0.975);
  std::vector<int> chosen = choose_design(problem, input.count, input.goal);
  std::vector<int> taken;
  double spread = advice.spread_now;
  while (!chosen.empty()) {
    std::size_t best = 0;
    double best_spread = std::numeric_limits<double>::infinity();
    for (std::size_t i = 0; i < chosen.size(); ++i) {
      taken.push_back(chosen[i]);
      const double after = spread_after(problem, taken, input.goal);
      taken.pop_back();
      if (after < best_spread) {
        best_spread = after;
        best = i;
      }
    }
    const Cell& cell = places[static_cast<std::size_t>(chosen[best])];
    advice.marks.push_back({cell.spot, cell.pixel, spread, best_spread});
    spread = best_spread;
    taken.push_back(chosen[best]);
    chosen.erase(chosen.begin() + static_cast<std::ptrdiff_t>(best));
  }
  if (advice.spread_now <= advice.allowed) {
    advice.enough = true;
    advice.why = "the 95 % band is inside the tolerance over the whole range";
  } else if (!advice.marks.empty() &&
             advice.marks.front().spread_after > (1.0 - kWorthwhile) * advice.spread_now) {
    advice.enough = true;
    advice.why =
        fmt::format("a further mark lowers the band by less than {:.0f} %", 100.0 * kWorthwhile);
  } else {
    advice.why = "the 95 % band is wider than the tolerance somewhere";
  }
  return advice;
}

}  // namespace rondel::range
