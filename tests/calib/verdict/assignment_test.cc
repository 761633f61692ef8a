#include "calib/verdict/assignment.h"

#include <gmock/gmock.h>

#include <algorithm>
#include <limits>
#include <numeric>
#include <random>
#include <vector>

namespace rondel::verdict {
namespace {

/// The least cost over every way to pair all of the shorter side, by trying them all.
double least_by_trying(const std::vector<double>& cost, int rows, int columns) {
  const int n = std::max(rows, columns);
  std::vector<int> order(static_cast<std::size_t>(n));
  std::iota(order.begin(), order.end(), 0);
  double least = std::numeric_limits<double>::infinity();
  do {
    double sum = 0.0;
    for (int r = 0; r < rows; ++r) {
      const int c = order[static_cast<std::size_t>(r)];
      if (c < columns) sum += cost[static_cast<std::size_t>(r * columns + c)];
    }
    least = std::min(least, sum);
  } while (std::next_permutation(order.begin(), order.end()));
  return least;
}

TEST(Assign, IsLeastOfAllPairings) {
  const std::uint32_t seed = 5;
  std::mt19937 random(seed);
  for (int trial = 0; trial < 400; ++trial) {
    const int rows = 1 + static_cast<int>(random() % 6);
    const int columns = 1 + static_cast<int>(random() % 6);
    std::vector<double> cost;
    for (int i = 0; i < rows * columns; ++i)
      cost.push_back(static_cast<double>(random() % 1000) / 100.0);
    const std::vector<int> pairs = assign(cost, rows, columns);
    ASSERT_EQ(pairs.size(), static_cast<std::size_t>(rows));
    double sum = 0.0;
    int paired = 0;
    std::vector<bool> used(static_cast<std::size_t>(columns), false);
    for (int r = 0; r < rows; ++r) {
      const int c = pairs[static_cast<std::size_t>(r)];
      if (c == kUnassigned) continue;
      ASSERT_FALSE(used[static_cast<std::size_t>(c)]) << "column twice, seed " << seed;
      used[static_cast<std::size_t>(c)] = true;
      ++paired;
      sum += cost[static_cast<std::size_t>(r * columns + c)];
    }
    EXPECT_EQ(paired, std::min(rows, columns));
    EXPECT_NEAR(sum, least_by_trying(cost, rows, columns), 1e-9) << "seed " << seed;
  }
}

TEST(Assign, TakesCrossedPairsWhereTheyAreCheaper) {
  // Nearest first would pair row 0 with column 0 (1) and leave row 1 with 100.
  EXPECT_THAT(assign(std::vector<double>{1.0, 2.0, 1.5, 100.0}, 2, 2), testing::ElementsAre(1, 0));
}

TEST(Assign, EmptySides) {
  EXPECT_TRUE(assign({}, 0, 3).empty());
  EXPECT_THAT(assign({}, 2, 0), testing::ElementsAre(kUnassigned, kUnassigned));
}

}  // namespace
}  // namespace rondel::verdict
