#include "optics/series_statistics.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <random>

#include "optics/autocorrelation.h"
#include "optics/moment_maps.h"
#include "optics/preparation.h"
#include "support/optics_reference.h"
#include "support/optics_samples.h"

namespace bentlight::optics {

namespace {

/// Log-normal, correlated, as OPD_rms in metres.
std::vector<double> opd_rms_like(std::size_t count, unsigned seed) {
  std::mt19937_64 random(seed);
  auto values = test::autoregressive(count, 0.8, random);
  for (double& value : values) value = 1e-7 * std::exp(0.4 * value);
  return values;
}

std::vector<double> normal_values(std::size_t count, unsigned seed) {
  std::mt19937_64 random(seed);
  return test::autoregressive(count, 0.0, random);
}

/// Values of NIST's StRD NumAcc2 and its kin: `center` once, then center - step and center + step in turn.
std::vector<double> alternating(double center, double step) {
  std::vector<double> values = {center};
  for (int i = 0; i < 500; ++i) values.insert(values.end(), {center - step, center + step});
  return values;
}

}  // namespace

TEST(SeriesStatistics, AgreeWithNumPyAndSciPy) {
  const auto values = opd_rms_like(5000, 21);
  const auto reference = test::optics_reference_of("series", values);
  const auto expected = [&](const char* name) { return reference[name].get<double>(); };

  const auto found = moments(values);
  EXPECT_NEAR(found.mean / expected("mean"), 1, 1e-13);
  EXPECT_NEAR(found.std / expected("std"), 1, 1e-13);
  EXPECT_NEAR(found.skewness / expected("skewness"), 1, 1e-12);
  EXPECT_NEAR(found.kurtosis / expected("kurtosis"), 1, 1e-12);

  const auto percents = reference["percents"].get<std::vector<double>>();
  const auto by_percent = percentiles(values, percents);
  for (std::size_t i = 0; i < percents.size(); ++i) {
    EXPECT_NEAR(by_percent[i] / reference["percentiles"][i].get<double>(), 1, 1e-14) << percents[i];
  }

  const auto bars = histogram(values, 37);
  EXPECT_EQ(bars.counts, reference["histogram_counts"].get<std::vector<double>>());
  for (std::size_t i = 0; i < bars.edges.size(); ++i) {
    EXPECT_NEAR(bars.edges[i] / reference["histogram_edges"][i].get<double>(), 1, 1e-13);
  }

  const auto fit = log_normal_fit(values).value();
  EXPECT_NEAR(fit.mu / expected("log_mean"), 1, 1e-13);
  EXPECT_NEAR(fit.sigma / expected("log_std"), 1, 1e-12);
  EXPECT_NEAR(fit.ks_distance, expected("log_ks"), 1e-12);
  const auto law = expected_counts(fit, bars.edges, values.size());
  for (std::size_t i = 0; i < law.size(); ++i)
    EXPECT_NEAR(law[i], reference["log_counts"][i].get<double>(), 1e-8);

  const auto correlation = autocorrelation(values, 100);
  for (std::size_t k = 0; k <= 100; ++k) {
    EXPECT_NEAR(correlation[k], reference["autocorrelation"][k].get<double>(), 1e-13) << k;
  }
  EXPECT_NEAR(effective_samples(values) / expected("effective_samples"), 1, 1e-10);
}

// The trade's default from start to end: NumPy subtracts the least-squares plane and the mean map.
TEST(SeriesStatistics, OfOpdRmsAndMapsAgreeWithNumPy) {
  const auto aperture = test::disc(0.2, 24, 0.3);
  const auto frames = test::rippled_frames(aperture, 50, 1e-7, 31);
  std::vector<double> numbers(aperture.x_m().begin(), aperture.x_m().end());
  numbers.insert(numbers.end(), aperture.y_m().begin(), aperture.y_m().end());
  for (const auto& frame : frames) numbers.insert(numbers.end(), frame.begin(), frame.end());
  const auto reference = test::optics_reference_of("frames", numbers, std::to_string(aperture.points()));
  std::vector<double> mean(aperture.points(), 0.0);
  for (const auto& frame : frames) {
    for (std::size_t p = 0; p < mean.size(); ++p) mean[p] += frame[p] / 50;
  }
  const auto kept = FramePreparation::make(aperture, parse_removal("piston,tilt").value(), {}).value();
  const auto taken =
      FramePreparation::make(aperture, parse_removal("piston,tilt,mean").value(), mean).value();
  FramePreparation::Scratch scratch;
  MomentAccumulator about_zero(aperture.points()), about_mean(aperture.points());

  auto block = test::block_of(frames);
  kept.prepare(block, scratch);
  about_zero.add(block);
  block = test::block_of(frames);
  taken.prepare(block, scratch);
  about_mean.add(block);

  // Values near 1e-7 m are held in float, to 6e-15 m.
  std::vector<double> rms;
  for (std::size_t t = 0; t < 50; ++t) {
    rms.push_back(std::sqrt(scratch.mean_square[t]));
    EXPECT_NEAR(rms[t], reference["opd_rms"][t].get<double>(), 1e-13);
  }
  const auto mean_map = about_zero.finish().mean;
  const auto rms_map = about_mean.finish().rms_about({});
  for (std::size_t p = 0; p < mean_map.size(); ++p) {
    EXPECT_NEAR(mean_map[p], reference["mean_map"][p].get<double>(), 2e-14);
    EXPECT_NEAR(rms_map[p], reference["rms_map"][p].get<double>(), 1e-13);
  }
  const auto found = moments(rms);
  const double overall = reference["opd_rms_overall"].get<double>();
  EXPECT_NEAR(found.mean, reference["opd_rms_mean"].get<double>(), 1e-13);
  EXPECT_NEAR(found.std, reference["opd_rms_std"].get<double>(), 1e-13);
  // overall^2 = mean^2 + std^2 (T - 1) / T: methods 1.4.
  EXPECT_NEAR(std::sqrt(found.mean * found.mean + found.std * found.std * 49 / 50), overall, 1e-13);
}

// NIST StRD, univariate: NumAcc1 … 4 (certified values from memory; the data follow from their description).
TEST(Moments, HaveNistsCertifiedValuesWhereCancellationThreatens) {
  const std::vector<double> first = {10000001, 10000003, 10000002};
  EXPECT_EQ(moments(first).mean, 10000002.0);
  EXPECT_EQ(moments(first).std, 1.0);

  const auto second = moments(alternating(1.2, 0.1));
  EXPECT_NEAR(second.mean, 1.2, 1e-15);
  EXPECT_NEAR(second.std, 0.1, 1e-15);

  const auto third = moments(alternating(1000000.2, 0.1));
  EXPECT_NEAR(third.mean, 1000000.2, 2e-10);
  EXPECT_NEAR(third.std, 0.1, 1e-10);  // 0.1 on a million is itself held to 1e-10

  const auto fourth = moments(alternating(10000000.2, 0.1));
  EXPECT_NEAR(fourth.mean, 10000000.2, 2e-9);
  EXPECT_NEAR(fourth.std, 0.1, 1e-9);
}

// NIST StRD, univariate: Michelso, certified to fifteen digits (from memory; methods 3.7).
TEST(Moments, HaveNistsCertifiedValuesOfMichelsonsData) {
  const auto found = moments(test::michelson());
  EXPECT_EQ(found.count, 100U);
  EXPECT_NEAR(found.mean, 299.852400000000, 1e-12);
  EXPECT_NEAR(found.std, 0.0790105478190518, 1e-14);  // the data themselves are held to 3e-14
}

TEST(Moments, OfASeriesThatNeverChangesHaveNoSpread) {
  const std::vector<double> values(50, 0.1);
  const auto found = moments(values);
  EXPECT_EQ(found.mean, 0.1);
  EXPECT_EQ(found.std, 0.0);
  EXPECT_EQ(found.skewness, 0.0);
}

TEST(Moments, OfOneValueAreAFault) {
  EXPECT_THROW(moments(std::vector{1.0}), std::invalid_argument);
}

TEST(Sorted, IsTheOrderOfTheStandardLibrary) {
  for (const std::size_t count : {0UL, 1UL, 2UL, 1000UL, 20000UL}) {
    auto values = normal_values(count, 5);
    if (count >= 1000) {
      values[10] = 0.0, values[11] = -0.0, values[12] = 1e300, values[13] = -1e-310;
      values[14] = INFINITY, values[15] = -INFINITY, values[16] = values[17];
    }
    auto expected = values;
    std::ranges::sort(expected);
    EXPECT_EQ(sorted(values), expected);
  }
}

TEST(Percentiles, OfOneValueAreThatValue) {
  EXPECT_EQ(percentiles(std::vector{3.0}, std::vector{0.0, 50.0, 100.0}), std::vector(3, 3.0));
}

TEST(Percentiles, ComeInTheOrderAsked) {
  const std::vector<double> values = {4, 1, 3, 2, 0};
  EXPECT_EQ(percentiles(values, std::vector{100.0, 0.0, 50.0, 12.5}), (std::vector<double>{4, 0, 2, 0.5}));
}

TEST(Histogram, ChoosesRoundEdgesNearTheRuleOfFreedmanAndDiaconis) {
  for (const std::size_t count : {20UL, 300UL, 5000UL, 100000UL}) {
    const auto values = opd_rms_like(count, 21);
    const auto wanted =
        2 *
        (percentiles(values, std::vector{75.0}).front() - percentiles(values, std::vector{25.0}).front()) /
        std::cbrt(static_cast<double>(count));
    const auto [low, high] = std::ranges::minmax(values);

    const auto bars = histogram(values, 0);

    const double width = bars.edges[1] - bars.edges[0];
    const double digits = width / std::pow(10, std::floor(std::log10(width * (1 + 1e-9))));
    EXPECT_TRUE(std::ranges::any_of(std::vector{1.0, 2.0, 2.5, 5.0}, [&](double d) {
      return std::abs(d - digits) < 1e-6;
    })) << width;
    EXPECT_NEAR(bars.edges[0] / width, std::round(bars.edges[0] / width), 1e-6);
    EXPECT_GE(bars.counts.size(), 16U);
    EXPECT_LE(bars.counts.size(), 128U);
    if (wanted > (high - low) / 126 && wanted < (high - low) / 32) {
      EXPECT_GE(width, wanted * (1 - 1e-9));
      EXPECT_LE(width, 2 * wanted);
    }
    double sum = 0;
    for (const double bar : bars.counts) sum += bar;
    EXPECT_EQ(sum, static_cast<double>(count));
    EXPECT_LE(bars.edges.front(), low);
    EXPECT_GE(bars.edges.back(), high);
    for (std::size_t bin = 0; bin < bars.counts.size(); ++bin) {
      const bool is_last = bin + 1 == bars.counts.size();
      const auto inside = std::ranges::count_if(values, [&](double v) {
        return v >= bars.edges[bin] && (v < bars.edges[bin + 1] || (is_last && v == bars.edges[bin + 1]));
      });
      ASSERT_EQ(bars.counts[bin], static_cast<double>(inside));
    }
  }
}

TEST(Histogram, OfEqualValuesHasThemInOneBin) {
  for (const double value : {0.0, 1e-7, -3.0}) {
    const auto bars = histogram(std::vector<double>(10, value), 0);
    EXPECT_EQ(std::ranges::count(bars.counts, 10.0), 1);
    EXPECT_TRUE(bars.edges.front() < value && value < bars.edges.back());
  }
}

// exp(mu + sigma^2 / 2) is the mean of the law: methods 3.5.
TEST(LogNormalFit, FindsTheParametersOfItsOwnLaw) {
  auto values = normal_values(20000, 6);
  for (double& value : values) value = std::exp(-16 + 0.3 * value);

  const auto fit = log_normal_fit(values).value();

  // Standard errors: sigma / sqrt(T) = 0.0021 and sigma / sqrt(2 T) = 0.0015; four of them.
  EXPECT_NEAR(fit.mu, -16, 0.0085);
  EXPECT_NEAR(fit.sigma, 0.3, 0.006);
  // With fitted parameters the distance stays below 1.035 / sqrt(T) at one percent (Lilliefors 1967, from
  // memory).
  EXPECT_LT(fit.ks_distance, 1.035 / std::sqrt(20000));
  EXPECT_NEAR(moments(values).mean / std::exp(fit.mu + fit.sigma * fit.sigma / 2), 1, 0.01);
}

TEST(LogNormalFit, IsRefusedWhereNoLawFits) {
  EXPECT_FALSE(log_normal_fit(std::vector{1.0, 2.0, 0.0}));
  EXPECT_FALSE(log_normal_fit(std::vector{1.0, -2.0}));
  EXPECT_FALSE(log_normal_fit(std::vector{2.0, 2.0, 2.0}));
  EXPECT_FALSE(log_normal_fit(std::vector{2.0}));
}

}  // namespace bentlight::optics
