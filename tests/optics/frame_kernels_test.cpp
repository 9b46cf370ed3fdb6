#include "optics/frame_kernels.h"

#include <gtest/gtest.h>

#include <cmath>
#include <random>
#include <vector>

namespace bentlight::optics {

namespace {

template <class Number = float>
std::vector<Number> noise(std::size_t count, unsigned seed) {
  std::mt19937 random(seed);
  std::normal_distribution<Number> normal;
  std::vector<Number> values(count);
  for (Number& value : values) value = normal(random);
  return values;
}

// Counts of frames and points that leave remainders of every kind: no group, one over, a tile and a bit.
const std::vector<std::pair<std::size_t, std::size_t>> shapes = {
    {1, 1}, {3, 7}, {4, 512}, {5, 513}, {9, 1543}};

// A tile's 512 products in eight lanes: 64 additions each round by at most 64 halves of a float step of the
// sum.
double allowed(double sum_of_sizes) {
  return 64 * 6e-8 * sum_of_sizes;
}

}  // namespace

TEST(PlaneSums, AreTheSumsOfProductsForAnyShape) {
  for (const auto& [count, points] : shapes) {
    const auto frames = noise(count * points, 1), a = noise(points, 2), b = noise(points, 3);
    std::vector<double> sums(3 * count, NAN);

    plane_sums(frames.data(), count, points, a.data(), b.data(), sums.data());

    for (std::size_t f = 0; f < count; ++f) {
      double s = 0, sa = 0, sb = 0, sizes = 0;
      for (std::size_t p = 0; p < points; ++p) {
        const double value = frames[f * points + p];
        s += value, sa += value * a[p], sb += value * b[p];
        sizes += std::abs(value) * (1 + std::abs(a[p]) + std::abs(b[p]));
      }
      EXPECT_NEAR(sums[3 * f], s, allowed(sizes));
      EXPECT_NEAR(sums[3 * f + 1], sa, allowed(sizes));
      EXPECT_NEAR(sums[3 * f + 2], sb, allowed(sizes));
    }
  }
}

TEST(SubtractPlane, LeavesTheDifferenceAndItsSquares) {
  for (const auto& [count, points] : shapes) {
    for (const bool has_center : {false, true}) {
      const auto before = noise(count * points, 1), center = noise(points, 4);
      const auto a = noise<double>(points, 2), b = noise<double>(points, 3),
                 plane = noise<double>(3 * count, 5);
      auto frames = before;
      std::vector<double> squares(count, NAN);

      subtract_plane(frames.data(), count, points, a.data(), b.data(), has_center ? center.data() : nullptr,
                     plane.data(), squares.data());

      for (std::size_t f = 0; f < count; ++f) {
        double sum = 0;
        for (std::size_t p = 0; p < points; ++p) {
          const double left = static_cast<double>(before[f * points + p]) - plane[3 * f] -
                              plane[3 * f + 1] * a[p] - plane[3 * f + 2] * b[p] -
                              (has_center ? double{center[p]} : 0.0);
          EXPECT_NEAR(frames[f * points + p], left, 2e-6);  // two roundings of values near ten
          sum += left * left;
        }
        EXPECT_NEAR(squares[f], sum, 1e-5 * sum + 1e-5);
      }
    }
  }
}

TEST(Lift, AddsOneNumberToEachFrame) {
  auto frames = noise(3 * 700, 1);
  const auto before = frames;
  const std::vector<float> lifts = {0.0F, 2.0F, -1.0F};
  std::vector<double> squares(3, NAN);

  lift(frames.data(), 3, 700, lifts.data(), squares.data());

  for (std::size_t f = 0; f < 3; ++f) {
    double sum = 0;
    for (std::size_t p = 0; p < 700; ++p) {
      ASSERT_EQ(frames[f * 700 + p], before[f * 700 + p] + lifts[f]);
      sum += double{frames[f * 700 + p]} * frames[f * 700 + p];
    }
    EXPECT_NEAR(squares[f], sum, allowed(sum));
    EXPECT_NEAR(square_sum({frames.data() + f * 700, 700}), sum, allowed(sum));
  }
}

TEST(AddAboutPilot, AddsSumsAndSquaresPointByPoint) {
  for (const auto& [count, points] : shapes) {
    const auto frames = noise(count * points, 1), pilot = noise(points, 2);
    std::vector<float> sum(points, 1.0F), squares(points, 2.0F);

    add_about_pilot(frames.data(), count, points, pilot.data(), sum.data(), squares.data());

    for (std::size_t p = 0; p < points; ++p) {
      double s = 1, q = 2;
      for (std::size_t f = 0; f < count; ++f) {
        const double difference = double{frames[f * points + p]} - double{pilot[p]};
        s += difference, q += difference * difference;
      }
      EXPECT_NEAR(sum[p], s, 2e-5);  // nine roundings of sums near ten
      EXPECT_NEAR(squares[p], q, 1e-5 * q);
    }
  }
}

// Associative sums must not let NaN disappear: masked points and bad frames are told by it.
TEST(FrameKernels, KeepNaN) {
  std::vector<float> frames(4 * 600, 1.0F);
  frames[600 + 3] = NAN;
  const std::vector<float> map(600, 0.5F);
  const std::vector<double> exact_map(600, 0.5), plane(12, 0.0);
  std::vector<double> sums(12), squares(4);

  plane_sums(frames.data(), 4, 600, map.data(), map.data(), sums.data());
  subtract_plane(frames.data(), 4, 600, exact_map.data(), exact_map.data(), nullptr, plane.data(),
                 squares.data());

  EXPECT_TRUE(std::isnan(sums[3]) && std::isnan(sums[4]) && std::isnan(sums[5]) && std::isnan(squares[1]));
  EXPECT_TRUE(std::isfinite(sums[0]) && std::isfinite(sums[6]) && std::isfinite(squares[0]) &&
              std::isfinite(squares[2]));
}

}  // namespace bentlight::optics
