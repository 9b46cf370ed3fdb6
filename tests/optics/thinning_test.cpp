#include "optics/thinning.h"

#include <gtest/gtest.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <numeric>
#include <random>

namespace bentlight::optics {

namespace {

constexpr double nan = std::numeric_limits<double>::quiet_NaN();

}  // namespace

TEST(Thinned, KeepsLeastGreatestAndMeanOfEachBin) {
  const std::vector<double> values = {3, 1, 2, 10, -4, 0, 7, 7};

  const auto thin = thinned(values, 2);

  EXPECT_EQ(thin.low, (std::vector<double>{1, -4}));
  EXPECT_EQ(thin.high, (std::vector<double>{10, 7}));
  EXPECT_EQ(thin.mean, (std::vector<double>{4, 2.5}));
  EXPECT_EQ(thin.first, (std::vector<std::size_t>{0, 4}));
  EXPECT_EQ(thin.count, (std::vector<std::size_t>{4, 4}));
}

TEST(Thinned, SkipsNaNAndSaysNaNWhereNothingIsLeft) {
  const std::vector<double> values = {nan, 5, 1, nan, nan, nan};

  const auto thin = thinned(values, 3);

  EXPECT_EQ(thin.low[0], 5);
  EXPECT_EQ(thin.mean[0], 5);
  EXPECT_EQ(thin.high[1], 1);
  EXPECT_TRUE(std::isnan(thin.low[2]) && std::isnan(thin.high[2]) && std::isnan(thin.mean[2]));
}

TEST(Thinned, GivesEachValueItsBinWhenTheyAreFew) {
  const std::vector<double> values = {1, 2, 3};
  EXPECT_EQ(thinned(values, 10).mean, values);
}

TEST(Thinned, OfNothingIsNothing) {
  EXPECT_TRUE(thinned({}, 10).mean.empty());
}

TEST(Thinned, CoversEveryValueOnceInBinsOfEqualLength) {
  std::mt19937 random(3);
  std::vector<double> values(1009);
  for (double& value : values) value = static_cast<double>(random() % 1000);
  for (const std::size_t bins : {1UL, 2UL, 7UL, 100UL, 1008UL, 1009UL}) {
    SCOPED_TRACE(bins);

    const auto thin = thinned(values, bins);

    std::size_t next = 0;
    for (std::size_t bin = 0; bin < bins; ++bin) {
      ASSERT_EQ(thin.first[bin], next);
      next += thin.count[bin];
      EXPECT_LE(thin.count[bin], (1009 + bins - 1) / bins);
    }
    EXPECT_EQ(next, values.size());
    EXPECT_EQ(std::ranges::max(thin.high), std::ranges::max(values));
    EXPECT_EQ(std::ranges::min(thin.low), std::ranges::min(values));
  }
}

}  // namespace bentlight::optics
