#include "calib/verdict/assignment.h"

#include <cassert>
#include <limits>

namespace rondel::verdict {
namespace {

/// rows <= columns: every row gets a column.
template <typename Cost>
std::vector<int> assign_all(Cost cost, int rows, int columns) {
  const auto m = static_cast<std::size_t>(columns) + 1;
  std::vector<double> row_potential(static_cast<std::size_t>(rows) + 1, 0.0);
  std::vector<double> column_potential(m, 0.0);
  std::vector<int> row_of(m, 0);  // 1-based; 0: free. Column 0 is the start of every path.
  std::vector<int> previous(m, 0);
  for (int row = 1; row <= rows; ++row) {
    row_of[0] = row;
    std::size_t at = 0;
    std::vector<double> least(m, std::numeric_limits<double>::infinity());
    std::vector<bool> done(m, false);
    do {
      done[at] = true;
      const auto r = static_cast<std::size_t>(row_of[at]);
      double step = std::numeric_limits<double>::infinity();
      std::size_t next = 0;
      for (std::size_t c = 1; c < m; ++c) {
        if (done[c]) continue;
        const double reduced = cost(static_cast<int>(r) - 1, static_cast<int>(c) - 1) -
                               row_potential[r] - column_potential[c];
        if (reduced < least[c]) {
          least[c] = reduced;
          previous[c] = static_cast<int>(at);
        }
        if (least[c] < step) {
          step = least[c];
          next = c;
        }
      }
      for (std::size_t c = 0; c < m; ++c) {
        if (done[c]) {
          row_potential[static_cast<std::size_t>(row_of[c])] += step;
          column_potential[c] -= step;
        } else {
          least[c] -= step;
        }
      }
      at = next;
    } while (row_of[at] != 0);
    while (at != 0) {
      const auto before = static_cast<std::size_t>(previous[at]);
      row_of[at] = row_of[before];
      at = before;
    }
  }
  std::vector<int> column_of(static_cast<std::size_t>(rows), kUnassigned);
  for (std::size_t c = 1; c < m; ++c) {
    if (row_of[c] != 0)
      column_of[static_cast<std::size_t>(row_of[c] - 1)] = static_cast<int>(c) - 1;
  }
  return column_of;
}

}  // namespace

std::vector<int> assign(std::span<const double> cost, int rows, int columns) {
  assert(cost.size() == static_cast<std::size_t>(rows) * static_cast<std::size_t>(columns));
  const auto at = [&](int r, int c) {
    return cost[static_cast<std::size_t>(r) * static_cast<std::size_t>(columns) +
                static_cast<std::size_t>(c)];
  };
  if (rows <= columns) return assign_all(at, rows, columns);
  const std::vector<int> row_of = assign_all([&](int r, int c) { return at(c, r); }, columns, rows);
  std::vector<int> column_of(static_cast<std::size_t>(rows), kUnassigned);
  for (int c = 0; c < columns; ++c) {
    column_of[static_cast<std::size_t>(row_of[static_cast<std::size_t>(c)])] = c;
  }
  return column_of;
}

}  // namespace rondel::verdict
