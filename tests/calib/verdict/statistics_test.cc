#include "calib/verdict/statistics.h"

#include <gmock/gmock.h>

#include <cmath>
#include <random>
#include <vector>

namespace rondel::verdict {
namespace {

// Printed tables of the distributions (as in Abramowitz and Stegun 1964, tables 26.1, 26.8, 26.10
// and 26.9), to the digits printed.
TEST(Quantiles, AgreeWithPrintedTables) {
  EXPECT_NEAR(normal_quantile(0.975), 1.959963984540054, 1e-12);
  EXPECT_NEAR(normal_quantile(0.95), 1.644853626951473, 1e-12);
  EXPECT_NEAR(normal_quantile(0.025), -1.959963984540054, 1e-12);
  EXPECT_NEAR(chi_square_quantile(0.95, 1), 3.841459, 5e-7);
  EXPECT_NEAR(chi_square_quantile(0.95, 10), 18.307038, 5e-7);
  EXPECT_NEAR(chi_square_quantile(0.025, 10), 3.246973, 5e-7);
  EXPECT_NEAR(chi_square_quantile(0.99, 100), 135.806723, 5e-7);
  EXPECT_NEAR(student_quantile(0.975, 1), 12.706205, 5e-7);
  EXPECT_NEAR(student_quantile(0.975, 10), 2.228139, 5e-7);
  EXPECT_NEAR(student_quantile(0.975, 120), 1.979930, 5e-7);
  EXPECT_NEAR(fisher_tail(3.708265, 3, 10), 0.05, 1e-7);
  EXPECT_NEAR(fisher_tail(161.447639, 1, 1), 0.05, 1e-8);
}

// Values of a general library: Boost.Math 1.74 (quantile and complement cdf, double precision),
// also where no table goes: broken degrees of freedom, far tails.
TEST(Quantiles, AgreeWithAGeneralLibrary) {
  const auto near = [](double got, double want) { EXPECT_NEAR(got / want, 1.0, 1e-9) << want; };
  near(normal_quantile(1e-6), -4.7534243088229);
  near(normal_quantile(0.2), -0.841621233572914);
  near(normal_quantile(0.999), 3.09023230616781);
  near(chi_square_quantile(0.001, 3.0), 0.0242975858156927);
  near(chi_square_quantile(0.5, 17.0), 16.3381823773925);
  near(chi_square_quantile(0.975, 250.0), 295.688628178786);
  near(chi_square_quantile(0.999, 0.5), 8.75288851577337);
  near(student_quantile(0.6, 2.5), 0.281459512748548);
  near(student_quantile(0.975, 4.0), 2.77644510519779);
  near(student_quantile(0.9995, 33.0), 3.61091300765447);
  near(student_quantile(0.01, 7.0), -2.99795156686853);
  near(fisher_tail(0.3, 2.0, 38.0), 0.742556573350197);
  near(fisher_tail(4.5, 1.0, 19.5), 0.0469186228323147);
  near(fisher_tail(12.0, 2.0, 350.0), 9.10704277058763e-06);
  near(fisher_tail(60.0, 1.0, 38.0), 2.46425442818229e-09);
  near(chi_square_tail(0.01, 1.0), 0.920344325445942);
  near(chi_square_tail(30.0, 12.0), 0.00279242933270092);
  near(chi_square_tail(90.0, 3.0), 2.19057011928531e-19);
}

TEST(Quantiles, TailsAreTheirInverse) {
  for (const double degrees : {1.0, 2.0, 7.0, 40.0}) {
    for (const double p : {1e-6, 0.01, 0.3, 0.5, 0.9, 0.999}) {
      EXPECT_NEAR(
          chi_square_tail(chi_square_quantile(1.0 - p, degrees), degrees), p, 1e-9 + 1e-9 * p)
          << degrees << " " << p;
    }
  }
  // Two degrees of freedom: exp(-x/2) exactly, far into the tail.
  EXPECT_NEAR(chi_square_tail(200.0, 2.0) / std::exp(-100.0), 1.0, 1e-12);
}

// The examples of Newcombe (1998), Statistics in Medicine 17, 857-872, method 3 (score without
// continuity correction). Each follows from the formula (2 n p + z^2 -+ z sqrt(z^2 + 4 n p q)) /
// (2 (n + z^2)) with z = 1.959964, worked to four digits.
TEST(Wilson, AgreesWithNewcombesExamples) {
  struct Example {
    int hits, trials;
    double low, high;
  };
  for (const Example& e : {Example{81, 263, 0.2553, 0.3662},
                           Example{15, 148, 0.0624, 0.1605},
                           Example{0, 20, 0.0, 0.1611},
                           Example{1, 29, 0.0061, 0.1718}}) {
    const auto interval = wilson(e.hits, e.trials);
    ASSERT_TRUE(interval);
    EXPECT_NEAR(interval->low, e.low, 5e-5) << e.hits << "/" << e.trials;
    EXPECT_NEAR(interval->high, e.high, 5e-5) << e.hits << "/" << e.trials;
  }
  EXPECT_FALSE(wilson(0, 0));
  EXPECT_EQ(wilson(7, 7)->high, 1.0);
}

TEST(Percentile, IsTypeSeven) {
  // Hyndman and Fan (1996), definition 7: between the order statistics around (n - 1) p.
  const std::vector<double> four = {4.0, 1.0, 3.0, 2.0};
  EXPECT_DOUBLE_EQ(*percentile(four, 0.95), 3.85);
  EXPECT_DOUBLE_EQ(*percentile(four, 0.5), 2.5);
  EXPECT_DOUBLE_EQ(*percentile(four, 0.0), 1.0);
  EXPECT_DOUBLE_EQ(*percentile(four, 1.0), 4.0);
  EXPECT_FALSE(percentile({}, 0.5));
}

TEST(Intervals, OfMeanAndSpreadByHand) {
  // n = 4, mean 2.5, s^2 = 5/3; t(0.975; 3) = 3.182446: half width 3.182446 sqrt(5/12).
  const std::vector<double> v = {1.0, 2.0, 3.0, 4.0};
  const auto m = mean_interval(v);
  ASSERT_TRUE(m);
  EXPECT_NEAR(m->high - 2.5, 3.182446 * std::sqrt(5.0 / 12.0), 1e-6);
  // Sum of squares 30; chi-square(4): 0.484419 and 11.143287.
  const auto r = rms_interval(v);
  ASSERT_TRUE(r);
  EXPECT_NEAR(r->low, std::sqrt(30.0 / 11.143287), 1e-6);
  EXPECT_NEAR(r->high, std::sqrt(30.0 / 0.484419), 1e-4);
  EXPECT_FALSE(mean_interval(std::vector<double>{1.0}));
}

TEST(Intervals, OfThe95thPercentileNeed72Values) {
  // The largest of n values lies below the 95th percentile with probability 0.95^n, and 0.95^71 =
  // 0.0262 > 0.025 >= 0.95^72.
  std::vector<double> values;
  for (int i = 0; i < 71; ++i) values.push_back(i);
  EXPECT_FALSE(percentile_interval(values, 0.95));
  values.push_back(71.0);
  const auto interval = percentile_interval(values, 0.95);
  ASSERT_TRUE(interval);
  EXPECT_EQ(interval->high, 71.0);
}

TEST(Intervals, CoverTheTruthAsOftenAsTheySay) {
  const std::uint32_t seed = 71;
  std::mt19937 random(seed);
  const auto uniform = [&] { return (static_cast<double>(random()) + 0.5) / 4294967296.0; };
  constexpr int kTrials = 3000;
  int mean_hits = 0;
  int rms_hits = 0;
  int percentile_hits = 0;
  for (int trial = 0; trial < kTrials; ++trial) {
    std::vector<double> values;
    for (int i = 0; i < 100; ++i) {
      values.push_back(std::sqrt(-2.0 * std::log(uniform())) *
                       std::cos(2.0 * 3.14159265358979 * uniform()));
    }
    const auto m = *mean_interval(values);
    mean_hits += m.low <= 0.0 && 0.0 <= m.high ? 1 : 0;
    const auto r = *rms_interval(values);
    rms_hits += r.low <= 1.0 && 1.0 <= r.high ? 1 : 0;
    const auto p = *percentile_interval(values, 0.95);
    percentile_hits += p.low <= 1.644854 && 1.644854 <= p.high ? 1 : 0;
  }
  // 0.95 with a standard deviation of sqrt(0.95 * 0.05 / 3000) = 0.004; four of them either way.
  EXPECT_NEAR(mean_hits / double{kTrials}, 0.95, 0.016) << "seed " << seed;
  EXPECT_NEAR(rms_hits / double{kTrials}, 0.95, 0.016) << "seed " << seed;
  // Ranks are whole numbers: at least what it says, and for n = 100 at most 0.98 (ranks 90 and 99
  // or 100: binomial sums).
  EXPECT_GE(percentile_hits / double{kTrials}, 0.95 - 0.016) << "seed " << seed;
  EXPECT_LE(percentile_hits / double{kTrials}, 0.99) << "seed " << seed;
}

TEST(CorrectedCriterion, IsHurvichAndTsais) {
  // -2 ln L = 10, k = 3, n = 20: 10 + 6 + 2*3*4/16 = 17.5.
  EXPECT_DOUBLE_EQ(*corrected_criterion(10.0, 3, 20), 17.5);
  EXPECT_FALSE(corrected_criterion(10.0, 3, 4));
  EXPECT_TRUE(corrected_criterion(10.0, 3, 5));
}

}  // namespace
}  // namespace rondel::verdict
