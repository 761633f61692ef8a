// The search against plain enumeration of every box on a small grid, and against what its result
// promises.
#include "calib/colour/box_search.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <random>

namespace rondel::colour {
namespace {

Hsv hsv(int h, int s, int v) {
  return {static_cast<std::uint8_t>(((h % 180) + 180) % 180),
          static_cast<std::uint8_t>(std::clamp(s, 0, 255)),
          static_cast<std::uint8_t>(std::clamp(v, 0, 255))};
}

/// Pixels scattered about a colour.
HsvCounts cloud(std::mt19937& rng, Hsv at, int spread, int count) {
  std::normal_distribution<double> normal(0.0, spread);
  HsvCounts counts;
  for (int k = 0; k < count; ++k) {
    counts.entries.push_back({hsv(at.h + static_cast<int>(normal(rng)),
                                  at.s + static_cast<int>(3 * normal(rng)),
                                  at.v + static_cast<int>(3 * normal(rng))),
                              1});
  }
  return counts;
}

HsvCounts noise(std::mt19937& rng, int count) {
  std::uniform_int_distribution<int> hue(0, 179);
  std::uniform_int_distribution<int> byte(0, 255);
  HsvCounts counts;
  for (int k = 0; k < count; ++k)
    counts.entries.push_back({hsv(hue(rng), byte(rng), byte(rng)), 1});
  return counts;
}

/// Everything on a grid of `n` values an axis: hue 0, 4, .., s and v likewise, so that a box of
/// single cells is any box of n^3 points.
struct Tiny {
  int n;
  Hsv point(std::mt19937& rng) const {
    std::uniform_int_distribution<int> cell(0, n - 1);
    // Hues sit at both ends of the scale, so that arcs through 0 matter.
    const int h = cell(rng);
    return hsv(h < n / 2 ? 4 * h : 180 - 4 * (n - h), 4 * cell(rng), 4 * cell(rng));
  }
};

/// The best score of all boxes on the grid, by trying them all.
double best_by_enumeration(const BoxProblem& problem, int n) {
  double best = -1.0;
  std::vector<int> hues;
  for (int h = 0; h < n; ++h) hues.push_back(h < n / 2 ? 4 * h : 180 - 4 * (n - h));
  for (const int from : hues) {
    for (const int to : hues) {
      for (int s0 = 0; s0 < n; ++s0) {
        for (int s1 = s0; s1 < n; ++s1) {
          for (int v0 = 0; v0 < n; ++v0) {
            for (int v1 = v0; v1 < n; ++v1) {
              const HsvBox box{{from, to}, {4 * s0, 4 * s1}, {4 * v0, 4 * v1}};
              if (problem.allowed(box)) best = std::max(best, problem.score(box));
            }
          }
        }
      }
    }
  }
  return best;
}

TEST(BoxSearch, FindsWhatEnumerationFinds) {
  const Tiny tiny{4};
  int with_answer = 0;
  int wrapped = 0;
  for (unsigned seed = 0; seed < 40; ++seed) {
    std::mt19937 rng{seed};
    BoxProblem problem;
    for (int light = 0; light < 1 + static_cast<int>(seed % 3); ++light) {
      HsvCounts counts;
      for (int k = 0; k < 12; ++k) counts.entries.push_back({tiny.point(rng), 1U + seed % 4});
      problem.wanted.push_back({counts, seed % 5 == 4 ? 3U : 0U});
    }
    for (int k = 0; k < 2; ++k) {
      HsvCounts counts;
      for (int j = 0; j < 25; ++j) counts.entries.push_back({tiny.point(rng), 1});
      problem.unwanted.push_back({counts, seed % 7});
    }
    const BoxFound found = find_box(problem);
    const double want = best_by_enumeration(problem, tiny.n);
    EXPECT_EQ(found.gap(), 0.0) << "seed " << seed;
    if (!found.box) {
      EXPECT_LE(want, found.score) << "seed " << seed;
      continue;
    }
    ++with_answer;
    wrapped += found.box->h.from > found.box->h.to ? 1 : 0;
    EXPECT_EQ(found.score, want) << "seed " << seed;
    EXPECT_EQ(problem.score(*found.box), found.score) << "seed " << seed;
    EXPECT_TRUE(problem.allowed(*found.box)) << "seed " << seed;
  }
  EXPECT_GT(with_answer, 20);
  EXPECT_GT(wrapped, 0);
}

TEST(BoxSearch, TheSameColoursTurnedRoundTheHueCircleScoreTheSame) {
  double want = -1.0;
  for (int turn = 0; turn < 180; turn += 4) {  // whole cells, so that the grid turns too
    std::mt19937 rng{7};
    BoxProblem problem;
    problem.wanted.push_back({cloud(rng, hsv(turn, 180, 160), 4, 400)});
    problem.wanted.push_back({cloud(rng, hsv(turn + 3, 150, 120), 4, 400)});
    problem.unwanted.push_back({cloud(rng, hsv(turn + 12, 120, 120), 5, 4000), 8});
    const BoxFound found = find_box(problem);
    ASSERT_TRUE(found.box);
    if (want < 0.0) want = found.score;
    EXPECT_EQ(found.score, want) << "turned by " << turn;
    EXPECT_TRUE(problem.allowed(*found.box));
  }
  EXPECT_GT(want, 0.3);
  EXPECT_LT(want, 1.0);
}

TEST(BoxSearch, AnInterruptedSearchSaysWhatItHas) {
  std::mt19937 rng{11};
  BoxProblem problem;
  problem.wanted.push_back({cloud(rng, hsv(20, 128, 128), 8, 300)});
  problem.wanted.push_back({cloud(rng, hsv(26, 120, 120), 8, 300)});
  problem.unwanted.push_back({noise(rng, 20000), 20});
  const double best = find_box(problem).score;
  BoxSearchOptions options;
  options.most_nodes = 2;
  const BoxFound found = find_box(problem, options);
  ASSERT_TRUE(found.box);
  EXPECT_TRUE(problem.allowed(*found.box));
  EXPECT_LE(found.score, best);
  EXPECT_GE(found.bound, best);
  EXPECT_GT(found.gap(), 0.0);
}

TEST(BoxSearch, RefiningKeepsCapsAndNeverLosesScore) {
  for (unsigned seed = 0; seed < 8; ++seed) {
    std::mt19937 rng{seed};
    BoxProblem problem;
    const int hue = 23 * static_cast<int>(seed);
    problem.wanted.push_back({cloud(rng, hsv(hue, 170, 150), 5, 800)});
    problem.wanted.push_back({cloud(rng, hsv(hue + 4, 150, 110), 5, 800)});
    problem.unwanted.push_back({noise(rng, 20000), 20});
    const BoxFound found = find_box(problem);
    ASSERT_TRUE(found.box);
    const HsvBox fine = refine(problem, *found.box);
    EXPECT_GE(problem.score(fine), found.score);
    EXPECT_TRUE(problem.allowed(fine));
  }
}

TEST(BoxSearch, TheWidestMarginIsTakenAmongEquals) {
  BoxProblem problem;
  HsvCounts wanted;
  for (int k = 0; k < 10; ++k) wanted.entries.push_back({hsv(178 + k / 2, 140 + k, 200), 1});
  problem.wanted.push_back({wanted, 0});
  HsvCounts unwanted;
  unwanted.entries = {{hsv(168, 145, 200), 5}, {hsv(14, 145, 200), 5}, {hsv(0, 100, 200), 5}};
  problem.unwanted.push_back({unwanted, 0});
  const BoxFound found = find_box(problem);
  ASSERT_TRUE(found.box);
  const HsvBox box = refine(problem, *found.box);
  // Hue 178..2, neighbours at 168 and 14: the free levels 169..177 and 3..13 are halved. Saturation
  // 140..149: the neighbour below is at 100, above there is none. Value: nothing anywhere.
  EXPECT_EQ(box.h.from, 174);
  EXPECT_EQ(box.h.to, 7);
  EXPECT_EQ(box.s[0], 121);
  EXPECT_EQ(box.s[1], 255);
  EXPECT_EQ(box.v[0], 0);
  EXPECT_EQ(box.v[1], 255);
}

}  // namespace
}  // namespace rondel::colour
