#include "calib/link/codebook.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <random>

namespace rondel::link {
namespace {

/// Worst relative error by brute force over a dense sweep of ranges.
double swept_worst(const Codebook& book) {
  double worst = 0.0;
  constexpr int kSteps = 400000;
  const double near_m = book.edges_m.front();
  const double ratio = book.edges_m.back() / near_m;
  for (int i = 0; i <= kSteps; ++i) {
    const double x = near_m * std::pow(ratio, static_cast<double>(i) / kSteps);
    double best = 1e9;
    const auto at = std::lower_bound(book.codes_m.begin(), book.codes_m.end(), x);
    if (at != book.codes_m.end()) best = std::min(best, std::abs(*at - x));
    if (at != book.codes_m.begin()) best = std::min(best, std::abs(*(at - 1) - x));
    worst = std::max(worst, best / x);
  }
  return worst;
}

// tanh(ln(b/a) / 2N) and the codes, computed from the formula in double precision; a 0.05, b 3 m.
TEST(RelativeCodebook, ReachesThePublishedBound) {
  EXPECT_NEAR(relative_bound(0.05, 3.0, 120), 0.0170581, 5e-8);
  EXPECT_NEAR(relative_bound(0.05, 3.0, 126), 0.0162460, 5e-8);
  EXPECT_NEAR(relative_bound(0.05, 3.0, 127), 0.0161181, 5e-8);
  const Codebook book = relative_codebook(0.05, 3.0, 127);
  EXPECT_NEAR(book.codes_m[0], 0.0508059035, 5e-11);
  EXPECT_NEAR(book.codes_m[1], 0.0524705202, 5e-11);
  EXPECT_NEAR(book.codes_m[126], 2.9516457877, 5e-11);
  for (const auto& [near_m, far_m, codes] :
       {std::tuple{0.05, 3.0, 127}, std::tuple{0.15, 3.0, 126}, std::tuple{0.3, 90.0, 6}}) {
    const Codebook b = relative_codebook(near_m, far_m, codes);
    EXPECT_NEAR(b.worst_relative_error(), relative_bound(near_m, far_m, codes), 1e-9);
    EXPECT_NEAR(swept_worst(b), relative_bound(near_m, far_m, codes), 1e-6);
  }
}

TEST(AbsoluteCodebook, OfEqualCells) {
  const Codebook book = absolute_codebook(0.05, 3.0, 127);
  // A uniform book of 127 is 23.23 % off at 0.05 m (computed).
  EXPECT_NEAR(book.worst_relative_error(), 0.2323, 5e-5);
  for (int k = 0; k < book.size(); ++k) {
    const auto i = static_cast<std::size_t>(k);
    EXPECT_NEAR(book.codes_m[i] - book.edges_m[i], 2.95 / 254, 1e-12);
  }
}

// Max 1960; to convergence: computed.
TEST(MeanSquareCodebook, IsLloydsAndMaxsForTheGaussian) {
  const auto gauss = [](double x) { return std::exp(-0.5 * x * x) / std::sqrt(2.0 * M_PI); };
  for (const auto& [codes, distortion] : {std::pair{2, 0.363380},
                                          std::pair{4, 0.117482},
                                          std::pair{8, 0.034548},
                                          std::pair{16, 0.009501}}) {
    const Codebook book = mean_square_codebook(-9.0, 9.0, codes, gauss);
    double sum = 0.0;
    constexpr int kSteps = 400000;
    for (int i = 0; i < kSteps; ++i) {
      const double x = -9.0 + 18.0 * (i + 0.5) / kSteps;
      const double off = book.codes_m[static_cast<std::size_t>(book.code_of(x))] - x;
      sum += gauss(x) * off * off * 18.0 / kSteps;
    }
    EXPECT_NEAR(sum, distortion, 1e-6) << codes;
  }
}

// N 127, ranges spread evenly over 0.05-3 m (computed): logarithmic 0.931 %, best 0.765 %, uniform
// 1.731 %. These are for many codes; the uniform book's first cell is nearly half of its range,
// which adds 0.7 % to its figure.
TEST(MeanSquareCodebook, BeatsTheLogarithmicBook) {
  const auto weight = [](double x) { return 1.0 / (x * x); };
  EXPECT_NEAR(relative_codebook(0.05, 3.0, 127).rms_relative_error(), 0.00931, 5e-6);
  EXPECT_NEAR(absolute_codebook(0.05, 3.0, 127).rms_relative_error(), 0.01731, 0.01 * 0.01731);
  EXPECT_NEAR(mean_square_codebook(0.05, 3.0, 127, weight).rms_relative_error(), 0.00765, 5e-6);
}

TEST(NoiseMatchedCodebook, HasEqualRatiosWhereThereIsNoNoise) {
  const Codebook book = noise_matched_codebook(0.15, 3.0, 126, [](double) { return 1e-6; });
  EXPECT_NEAR(book.worst_relative_error(), relative_bound(0.15, 3.0, 126), 2e-5);
}

TEST(NoiseMatchedCodebook, NoMovedEdgeIsBetter) {
  // Grows like what a pixel is worth.
  const auto noise = [](double x) { return 0.004 + 0.03 * x * x; };
  const Codebook book = noise_matched_codebook(0.15, 3.0, 60, noise);
  const double best = mean_log_error(book, noise);
  EXPECT_LT(best, mean_log_error(relative_codebook(0.15, 3.0, 60), noise));
  std::mt19937 random(1);
  std::normal_distribution<double> normal;
  for (int trial = 0; trial < 300; ++trial) {
    // Smooth moves: the solution is that of many codes, single edges have a little play.
    Codebook moved = book;
    const double phase = normal(random);
    const double waves = 1.0 + 2.0 * std::abs(normal(random));
    for (std::size_t k = 1; k + 1 < moved.edges_m.size(); ++k) {
      const double t = static_cast<double>(k) / 60.0;
      const double cell = book.edges_m[k + 1] - book.edges_m[k];
      moved.edges_m[k] += 2.0 * cell * std::sin(M_PI * t) * std::sin(waves * 3.0 * t + phase);
    }
    if (!std::is_sorted(moved.edges_m.begin(), moved.edges_m.end())) continue;
    EXPECT_GT(mean_log_error(moved, noise), best - 1e-4) << "trial " << trial;
  }
}

TEST(Codebook, FindsItsCells) {
  const Codebook book = relative_codebook(0.1, 10.0, 14);
  EXPECT_EQ(book.code_of(0.01), 0);
  EXPECT_EQ(book.code_of(50.0), 13);
  for (int k = 0; k < 14; ++k)
    EXPECT_EQ(book.code_of(book.codes_m[static_cast<std::size_t>(k)]), k);
}

}  // namespace
}  // namespace rondel::link
