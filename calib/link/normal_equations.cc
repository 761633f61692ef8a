#include "calib/link/normal_equations.h"

#include <algorithm>
#include <cassert>
#include <cmath>
#include <cstddef>

namespace rondel::link {

NormalEquations::NormalEquations(int unknowns, int bandwidth)
    : unknowns_(unknowns),
      bandwidth_(std::min(bandwidth, unknowns - 1)),
      lower_(static_cast<std::size_t>(unknowns) * static_cast<std::size_t>(bandwidth_ + 1)),
      right_(static_cast<std::size_t>(unknowns)) {}

double& NormalEquations::at(int row, int column) {
  assert(row >= column && row - column <= bandwidth_);
  return lower_[static_cast<std::size_t>(row) * static_cast<std::size_t>(bandwidth_ + 1) +
                static_cast<std::size_t>(row - column)];
}

void NormalEquations::add(std::span<const std::pair<int, double>> row,
                          std::array<double, 2> wanted,
                          double importance) {
  for (const auto& [i, a] : row) {
    for (const auto& [j, b] : row) {
      if (j <= i) at(i, j) += importance * a * b;
    }
    for (std::size_t side = 0; side < 2; ++side) {
      right_[static_cast<std::size_t>(i)][side] += importance * a * wanted[side];
    }
  }
}

std::vector<std::array<double, 2>> NormalEquations::solve() {
  // What the rows hardly decide is not worth its rounding: such an unknown stays 0.
  constexpr double kLeast = 1e-12;
  std::vector<char> free(static_cast<std::size_t>(unknowns_), 1);
  for (int j = 0; j < unknowns_; ++j) {
    const int first = std::max(0, j - bandwidth_);
    const double before = at(j, j);
    for (int k = first; k < j; ++k) at(j, j) -= at(j, k) * at(j, k);
    free[static_cast<std::size_t>(j)] = at(j, j) > kLeast * before ? 1 : 0;
    const double root = std::sqrt(std::max(at(j, j), 0.0));
    for (int i = j + 1; i <= std::min(unknowns_ - 1, j + bandwidth_); ++i) {
      if (free[static_cast<std::size_t>(j)] == 0) {
        at(i, j) = 0.0;
        continue;
      }
      for (int k = std::max(0, i - bandwidth_); k < j; ++k) at(i, j) -= at(i, k) * at(j, k);
      at(i, j) /= root;
    }
    at(j, j) = root;
  }
  std::vector<std::array<double, 2>> x = right_;
  const auto solve_for = [&](int i, auto each) {
    for (std::size_t side = 0; side < 2; ++side) {
      double& value = x[static_cast<std::size_t>(i)][side];
      each(value, side);
      value = free[static_cast<std::size_t>(i)] != 0 ? value / at(i, i) : 0.0;
    }
  };
  for (int i = 0; i < unknowns_; ++i) {
    solve_for(i, [&](double& value, std::size_t side) {
      for (int k = std::max(0, i - bandwidth_); k < i; ++k) {
        value -= at(i, k) * x[static_cast<std::size_t>(k)][side];
      }
    });
  }
  for (int i = unknowns_; i-- > 0;) {
    solve_for(i, [&](double& value, std::size_t side) {
      for (int k = i + 1; k <= std::min(unknowns_ - 1, i + bandwidth_); ++k) {
        value -= at(k, i) * x[static_cast<std::size_t>(k)][side];
      }
    });
  }
  return x;
}

}  // namespace rondel::link
