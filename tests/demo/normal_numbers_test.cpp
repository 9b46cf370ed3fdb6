#include "demo/normal_numbers.h"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

namespace bentlight::demo {
namespace {

TEST(NormalNumbers, HaveTheMomentsOfAStandardNormal) {
  constexpr std::size_t count = 1'000'000;
  std::vector<float> numbers(count);

  NormalNumbers(3, 5).fill(7, numbers);

  double mean = 0.0, square = 0.0, cube = 0.0, fourth = 0.0, neighbours = 0.0;
  for (std::size_t i = 0; i < count; ++i) {
    const double x = static_cast<double>(numbers[i]);
    mean += x / count;
    square += x * x / count;
    cube += x * x * x / count;
    fourth += x * x * x * x / count;
    if (i > 0) neighbours += x * static_cast<double>(numbers[i - 1]) / count;
  }
  // Of n numbers the moments 1 to 4 have standard errors of sqrt(1, 2, 15, 96) / sqrt(n); four of them. The
  // tails that end at 5.77 take 1e-6 from the fourth.
  const double error = 4.0 / std::sqrt(static_cast<double>(count));
  EXPECT_NEAR(mean, 0.0, error);
  EXPECT_NEAR(square, 1.0, std::sqrt(2.0) * error);
  EXPECT_NEAR(cube, 0.0, std::sqrt(15.0) * error);
  EXPECT_NEAR(fourth, 3.0, std::sqrt(96.0) * error);
  EXPECT_NEAR(neighbours, 0.0, error);
}

TEST(NormalNumbers, DependOnSeedStreamAndRowAlone) {
  std::vector<float> first(1000), again(1000), shorter(301), other(1000);
  NormalNumbers(1, 2).fill(3, first);
  NormalNumbers(1, 2).fill(3, again);
  NormalNumbers(1, 2).fill(3, shorter);

  EXPECT_EQ(first, again);
  EXPECT_EQ(std::vector<float>(first.begin(), first.begin() + 301), shorter);
  for (const auto& [seed, stream, row] : {std::array{9, 2, 3}, std::array{1, 9, 3}, std::array{1, 2, 9}}) {
    NormalNumbers(static_cast<std::uint64_t>(seed), static_cast<std::uint64_t>(stream))
        .fill(static_cast<std::uint64_t>(row), other);
    double correlation = 0.0;
    for (std::size_t i = 0; i < first.size(); ++i) {
      correlation += static_cast<double>(first[i]) * static_cast<double>(other[i]) / 1000.0;
    }
    EXPECT_LT(std::abs(correlation), 4.0 / std::sqrt(1000.0)) << seed << ' ' << stream << ' ' << row;
  }
}

TEST(NormalNumbers, AddWithTheirScale) {
  std::vector<float> numbers(200), values(200, 2.0F);
  NormalNumbers(1, 1).fill(0, numbers);

  NormalNumbers(1, 1).add_to(0, 0.5F, values);

  // One rounding of the sum, for the product of 0.5 is exact.
  for (std::size_t i = 0; i < values.size(); ++i) EXPECT_FLOAT_EQ(values[i], 2.0F + 0.5F * numbers[i]);
}

}  // namespace
}  // namespace bentlight::demo
