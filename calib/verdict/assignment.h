#pragma once

#include <span>
#include <vector>

namespace rondel::verdict {

/// A row of a cost table may stay without a partner by this: its cost is infinite everywhere.
inline constexpr int kUnassigned = -1;

/// Pairs rows with columns one to one so that as many as possible are paired and their total cost
/// is least (Kuhn 1955; shortest augmenting paths with potentials, Jonker and Volgenant 1987;
/// O(n^3)). `cost` is row-major, rows x columns, finite, >= 0. Answers the column of each row;
/// min(rows, columns) rows have one, the others kUnassigned.
[[nodiscard]] std::vector<int> assign(std::span<const double> cost, int rows, int columns);

}  // namespace rondel::verdict
