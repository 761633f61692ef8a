#pragma once

#include <array>
#include <span>
#include <utility>
#include <vector>

namespace rondel::link {

/// Least squares for two right-hand sides at once by normal equations and Cholesky's method, where
/// every row touches only unknowns that are at most `bandwidth` apart.
class NormalEquations {
 public:
  NormalEquations(int unknowns, int bandwidth);
  /// The row sum(weight_i x_i) = wanted, one for each side; `importance` multiplies its square.
  void add(std::span<const std::pair<int, double>> row,
           std::array<double, 2> wanted,
           double importance);
  /// The unknowns for both sides. Those that no row decides come out as 0.
  [[nodiscard]] std::vector<std::array<double, 2>> solve();

 private:
  double& at(int row, int column);  // column <= row <= column + bandwidth
  int unknowns_;
  int bandwidth_;
  std::vector<double> lower_;
  std::vector<std::array<double, 2>> right_;
};

}  // namespace rondel::link
