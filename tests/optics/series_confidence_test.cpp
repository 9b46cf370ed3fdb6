// Intervals against simulation, quantiles against SciPy, and what holds of a series that stands still or does
// not.
#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <cstdio>
#include <numbers>

#include "optics/confidence.h"
#include "optics/series_statistics.h"
#include "support/optics_reference.h"
#include "support/optics_samples.h"

namespace bentlight::optics {

namespace {

/// Share of trials on autoregressive series of unit variance and mean zero in which `interval_of` holds the
/// truth.
template <class IntervalOf>
double coverage(double phi, std::size_t count, double truth, int trials, IntervalOf interval_of) {
  std::mt19937_64 random(20241);
  int held = 0;
  for (int trial = 0; trial < trials; ++trial) {
    const auto interval = interval_of(test::autoregressive(count, phi, random));
    held += interval.low <= truth && truth <= interval.high;
  }
  const double share = static_cast<double>(held) / trials;
  std::printf("[ coverage ] phi %.2f, %zu values: %.1f %%\n", phi, count, 100 * share);
  return share;
}

}  // namespace

// SciPy's stdtrit and ndtri, by tests/reference/optics_reference.py; the former is itself off by 1e-9 from
// the closed form of one degree of freedom (below).
TEST(Quantiles, AgreeWithSciPy) {
  const auto reference = test::optics_reference("quantiles");
  for (const auto& row : reference["student_t"]) {
    EXPECT_NEAR(student_t_quantile(row[0], row[1]) / row[2].get<double>(), 1.0, 1e-8) << row;
  }
  for (const auto& row : reference["normal"]) {
    EXPECT_NEAR(normal_quantile(row[0]), row[1].get<double>(), 1e-12 * (1 + std::abs(row[1].get<double>())))
        << row;
  }
}

// One degree of freedom is Cauchy's law, t = tan(pi (p - 1/2)); two have t = (2 p - 1) / sqrt(2 p (1 - p)).
TEST(Quantiles, OfStudentHaveTheClosedForms) {
  for (const double p : {0.5001, 0.6, 0.75, 0.9, 0.975, 0.999, 0.99999}) {
    const double of_one = std::tan(std::numbers::pi * (p - 0.5)),
                 of_two = (2 * p - 1) / std::sqrt(2 * p * (1 - p));
    // 1 - p itself is known to 1e-16, which is 1e-11 of the farthest tail; near the middle the tail is a half
    // less what is wanted, good to a few hundred roundings.
    EXPECT_NEAR(student_t_quantile(p, 1), of_one, 2e-11 * of_one + 1e-12) << p;
    EXPECT_NEAR(student_t_quantile(p, 2), of_two, 2e-11 * of_two + 1e-12) << p;
  }
}

TEST(Quantiles, AreSymmetricAndRefuseWhatHasNone) {
  EXPECT_EQ(student_t_quantile(0.5, 3), 0.0);
  EXPECT_NEAR(student_t_quantile(0.1, 3), -student_t_quantile(0.9, 3), 1e-12);
  EXPECT_THROW(student_t_quantile(1.0, 3), std::invalid_argument);
  EXPECT_THROW(student_t_quantile(0.9, 0), std::invalid_argument);
  EXPECT_THROW(normal_quantile(0.0), std::invalid_argument);
}

// Twelve hundred trials scatter by sqrt(0.95 * 0.05 / 1200) = 0.6 %: 93 to 97 % is three of these.
TEST(MeanInterval, HoldsTheMeanInNinetyFivePercentOfTrials) {
  const auto interval = [](std::span<const double> values) { return mean_interval(values, 0.95); };
  for (const double phi : {0.0, 0.5, 0.9}) {
    const double share = coverage(phi, 4000, 0.0, 1200, interval);
    EXPECT_GE(share, 0.93);
    EXPECT_LE(share, 0.97);
  }
  // Two hundred independent values' worth; six hundred trials scatter by 0.9 %.
  const double share = coverage(0.98, 20000, 0.0, 600, interval);
  EXPECT_GE(share, 0.92);
  EXPECT_LE(share, 0.98);
}

TEST(PercentileInterval, HoldsThePercentileInNinetyFivePercentOfTrials) {
  for (const double phi : {0.0, 0.5, 0.9}) {
    for (const double percent : {50.0, 90.0}) {
      const double share = coverage(
          phi, 4000, normal_quantile(percent / 100), 1200,
          [&](std::span<const double> values) { return percentile_interval(values, percent, 0.95); });
      EXPECT_GE(share, 0.93) << percent;
      EXPECT_LE(share, 0.97) << percent;
    }
  }
}

TEST(MeanInterval, OfIndependentValuesIsStudents) {
  std::mt19937_64 random(3);
  const auto values = test::autoregressive(40000, 0.0, random);

  const auto interval = mean_interval(values, 0.95);

  // 1.96 / sqrt(T); the spread of two hundred batches is known to 1 / sqrt(2 * 200) = 5 %, three of these.
  EXPECT_NEAR((interval.high - interval.low) / 2 * std::sqrt(40000.0) / 1.96, 1.0, 0.15);
  EXPECT_NEAR((interval.high + interval.low) / 2, moments(values).mean, 1e-15);
  EXPECT_EQ(interval.level, 0.95);
}

TEST(MeanInterval, WidensWithTheLevelAndTheMemory) {
  std::mt19937_64 random(3);
  const auto quick = test::autoregressive(20000, 0.0, random),
             slow = test::autoregressive(20000, 0.9, random);
  const auto width = [](const Interval& interval) { return interval.high - interval.low; };

  EXPECT_GT(width(mean_interval(quick, 0.99)), width(mean_interval(quick, 0.9)));
  // sqrt((1 + 0.9) / (1 - 0.9)) = 4.4
  EXPECT_NEAR(width(mean_interval(slow, 0.95)) / width(mean_interval(quick, 0.95)), 4.4, 1.0);
}

TEST(PercentileInterval, EndsAtTheExtremeValues) {
  const std::vector<double> values = {3, 1, 2, 5, 4, 9, 7, 8};
  const auto interval = percentile_interval(values, 99.0, 0.95);
  EXPECT_EQ(interval.high, 9.0);
  EXPECT_GE(interval.low, 1.0);
}

TEST(SeriesConfidence, OfAConstantIsThatConstant) {
  const std::vector<double> values(100, 2.5);
  const SeriesConfidence series(values);
  EXPECT_EQ(series.mean_interval(0.95).low, 2.5);
  EXPECT_EQ(series.percentile_interval(50, 0.95).high, 2.5);
  EXPECT_EQ(series.stationarity().halves_z, 0.0);
  EXPECT_EQ(series.convergence(0.95).high.back(), 2.5);
}

TEST(SeriesConfidence, OfFewerThanTwoValuesIsAFault) {
  EXPECT_THROW(SeriesConfidence(std::vector{1.0}), std::invalid_argument);
}

// Under the null both numbers are normal deviates: beyond 1.96 in one case of twenty.
TEST(Stationarity, OfAStillSeriesIsWithinChance) {
  std::mt19937_64 random(8);
  int halves = 0, arrangements = 0;
  for (int trial = 0; trial < 1000; ++trial) {
    const auto found = stationarity(test::autoregressive(4000, 0.8, random));
    halves += std::abs(found.halves_z) > 1.96;
    arrangements += std::abs(found.reverse_arrangements_z) > 1.96;
  }
  // sqrt(1000 * 0.05 * 0.95) = 7; four of these.
  EXPECT_NEAR(halves, 50, 28);
  EXPECT_NEAR(arrangements, 50, 28);
}

TEST(Stationarity, SeesADriftAndItsDirection) {
  std::mt19937_64 random(8);
  auto values = test::autoregressive(4000, 0.5, random);
  for (std::size_t t = 0; t < values.size(); ++t) values[t] += 1.0 * static_cast<double>(t) / 4000;

  const auto rising = stationarity(values);
  std::ranges::reverse(values);
  const auto falling = stationarity(values);

  EXPECT_GT(rising.halves_z, 3);
  EXPECT_LT(rising.reverse_arrangements_z, -3);
  EXPECT_LT(falling.halves_z, -3);
  EXPECT_GT(falling.reverse_arrangements_z, 3);
}

TEST(Stationarity, OfTooFewValuesIsNotJudged) {
  EXPECT_EQ(stationarity(std::vector{1.0, 9.0, 2.0}).halves_z, 0.0);
}

TEST(Convergence, HasTheRunningMeansAndEndsAtTheWhole) {
  std::mt19937_64 random(8);
  const auto values = test::autoregressive(3000, 0.5, random);

  const auto found = convergence(values, 0.95);

  EXPECT_EQ(found.frames.back(), 3000.0);
  for (std::size_t i = 0; i < found.frames.size(); ++i) {
    double sum = 0;
    for (std::size_t t = 0; t < static_cast<std::size_t>(found.frames[i]); ++t) sum += values[t];
    EXPECT_NEAR(found.mean[i], sum / found.frames[i], 1e-12);
    if (i == 0) continue;
    EXPECT_GT(found.frames[i], found.frames[i - 1]);
    EXPECT_LT(found.high[i] - found.low[i], found.high[i - 1] - found.low[i - 1]);
  }
  // phi = 0.5 takes three values for an independent one: 1.96 sqrt(3 / 3000), the memory known to a tenth.
  EXPECT_NEAR((found.high.back() - found.low.back()) / 2, 1.96 * std::sqrt(3.0 / 3000), 0.012);
}

TEST(Convergence, OfTwoValuesIsTheirMean) {
  EXPECT_EQ(convergence(std::vector{1.0, 3.0}, 0.95).mean.back(), 2.0);
}

// For an autoregressive series the sums of Politis and White are known, g = (1 + phi) / (1 - phi) and
// G = 2 phi / (1 - phi)^2 (sum the geometric series), so b = (2 G^2 / (4/3 g^2) T)^(1/3).
TEST(Bootstrap, BlockLengthIsThatOfTheLawForAnAutoregressiveSeries) {
  for (const double phi : {0.3, 0.6, 0.8}) {
    std::mt19937_64 random(5);
    double sum = 0;
    for (int trial = 0; trial < 20; ++trial)
      sum += bootstrap_block_length(test::autoregressive(20000, phi, random)) / 20;
    const double g = (1 + phi) / (1 - phi), slope = 2 * phi / ((1 - phi) * (1 - phi));
    EXPECT_NEAR(sum / std::cbrt(2 * slope * slope / (4.0 / 3.0 * g * g) * 20000), 1.0, 0.15) << phi;
  }
}

TEST(Bootstrap, OfTheMeanAgreesWithTheLaw) {
  std::mt19937_64 random(5);
  const auto values = test::autoregressive(5000, 0.7, random);
  const auto mean = [](std::span<const double> sample) { return moments(sample).mean; };

  const auto found = bootstrap_interval(values, mean, {.level = 0.95, .resamples = 600, .seed = 7});

  // 2 * 1.96 * sqrt((1 + 0.7) / (1 - 0.7) / 5000) = 0.132; blocks shorten it by some percent, draws scatter
  // by 3 %.
  EXPECT_NEAR((found.high - found.low) / 0.132, 1.0, 0.2);
  EXPECT_LT(found.low, moments(values).mean);
  EXPECT_GT(found.high, moments(values).mean);
}

TEST(Bootstrap, OfTheMedianHoldsItInNearNinetyFivePercentOfTrials) {
  const auto median = [](std::span<const double> sample) {
    return percentiles(sample, std::vector{50.0}).front();
  };
  const double share = coverage(0.5, 1000, 0.0, 300, [&](std::span<const double> values) {
    return bootstrap_interval(values, median, {.level = 0.95, .resamples = 200, .seed = 3});
  });
  // Three hundred trials scatter by 1.3 %, and percentiles of two hundred resamples give one percent away.
  EXPECT_GE(share, 0.90);
  EXPECT_LE(share, 0.985);
}

TEST(Bootstrap, WithOneSeedGivesOneAnswer) {
  std::mt19937_64 random(5);
  const auto values = test::autoregressive(500, 0.7, random);
  const auto spread = [](std::span<const double> sample) { return moments(sample).std; };
  const auto of_seed = [&](std::uint64_t seed) {
    return bootstrap_interval(values, spread, {.resamples = 50, .seed = seed});
  };
  EXPECT_EQ(of_seed(1).low, of_seed(1).low);
  EXPECT_NE(of_seed(1).low, of_seed(2).low);
}

}  // namespace bentlight::optics
