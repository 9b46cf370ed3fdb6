#include "optics/autocorrelation.h"

#include <gtest/gtest.h>

#include <cmath>

#include "support/optics_samples.h"

namespace bentlight::optics {

namespace {

std::vector<double> direct(std::span<const double> values, std::size_t max_lag) {
  const auto count = values.size();
  double mean = 0;
  for (const double value : values) mean += value / static_cast<double>(count);
  std::vector<double> r;
  for (std::size_t k = 0; k <= max_lag; ++k) {
    double sum = 0, square = 0;
    for (std::size_t t = 0; t + k < count; ++t) sum += (values[t] - mean) * (values[t + k] - mean);
    for (std::size_t t = 0; t < count; ++t) square += (values[t] - mean) * (values[t] - mean);
    r.push_back(sum / square);
  }
  return r;
}

}  // namespace

// NIST StRD NumAcc2 and 4: lag-1 autocorrelation -0.999 (certified, from memory). It follows in a line: the
// thousand deviations are +-0.1 in turn after a first of zero, so 999 products of -0.01 over a thousand
// squares of 0.01.
TEST(Autocorrelation, HasNistsCertifiedValue) {
  for (const auto& [center, tolerance] : {std::pair{1.2, 1e-13}, std::pair{10000000.2, 1e-8}}) {
    std::vector<double> values = {center};
    for (int i = 0; i < 500; ++i) values.insert(values.end(), {center - 0.1, center + 0.1});
    EXPECT_NEAR(autocorrelation(values, 1)[1], -0.999, tolerance);
  }
}

// NIST StRD, Michelso: lag-1 autocorrelation (certified, from memory; methods 3.7).
TEST(Autocorrelation, OfMichelsonsDataIsNistsCertifiedValue) {
  EXPECT_NEAR(autocorrelation(test::michelson(), 1)[1], 0.535199668621283, 1e-12);
}

TEST(Autocorrelation, ByTransformsIsThatOfDirectSums) {
  std::mt19937_64 random(4);
  for (const std::size_t count : {50UL, 777UL, 4096UL}) {
    const auto values = test::autoregressive(count, 0.7, random);
    for (const std::size_t lags : {0UL, 5UL, 48UL, 49UL, count / 3, count - 1}) {
      if (lags >= count) continue;
      const auto expected = direct(values, lags);

      const auto found = autocorrelation(values, lags);

      ASSERT_EQ(found.size(), lags + 1);
      for (std::size_t k = 0; k <= lags; ++k) ASSERT_NEAR(found[k], expected[k], 1e-12) << count << " " << k;
    }
  }
}

TEST(Autocorrelation, OfASeriesThatNeverChangesIsZeroBeyondLagZero) {
  EXPECT_EQ(autocorrelation(std::vector<double>(10, 0.1), 3), (std::vector<double>{1, 0, 0, 0}));
}

TEST(Autocorrelation, OfMoreLagsThanValuesIsAFault) {
  EXPECT_THROW(autocorrelation(std::vector{1.0, 2.0}, 2), std::invalid_argument);
}

// An autoregressive series has N_eff / T = (1 - phi) / (1 + phi) in the limit (sum the geometric series):
// methods 3.3.
TEST(EffectiveSamples, OfAnAutoregressiveSeriesAreItsShare) {
  struct Case {
    double phi, share;
  };
  for (const auto& [phi, share] :
       {Case{0.0, 1.0}, Case{0.5, 1.0 / 3.0}, Case{0.9, 0.05263}, Case{0.99, 0.0050251}}) {
    std::mt19937_64 random(17);
    double sum = 0;
    for (int trial = 0; trial < 10; ++trial)
      sum += effective_samples(test::autoregressive(200000, phi, random)) / 200000;

    // The sum of correlations scatters by about sqrt(2 (2 M + 1) / T) with M lags up to the cut, and the cut
    // leans to a longer memory by a few parts in a hundred; ten trials average the scatter.
    EXPECT_NEAR(sum / 10 / share, 1.0, 0.05) << phi;
  }
}

TEST(EffectiveSamples, OfASlowTrendAreFew) {
  std::vector<double> trend(10000);
  for (std::size_t t = 0; t < trend.size(); ++t) trend[t] = static_cast<double>(t);
  EXPECT_LT(effective_samples(trend), 10.0);
}

TEST(EffectiveSamples, OfASeriesThatNeverChangesAreAllOfThem) {
  EXPECT_EQ(effective_samples(std::vector<double>(100, 3.0)), 100.0);
}

TEST(EffectiveSamples, OfFewValuesAreTheirNumber) {
  EXPECT_EQ(effective_samples(std::vector{1.0, 5.0, 2.0}), 3.0);
}

}  // namespace bentlight::optics
