#include "demo/shapes.h"

#include <gtest/gtest.h>

#include <cmath>
#include <vector>

namespace bentlight::demo {
namespace {

/// The frame that holds one of each shape times its weight, by half of the points and reflection.
std::vector<float> unfolded(const ShapeMatrix& shapes,
                            const ShapeOrder& order,
                            const Eigen::RowVectorXf& weights,
                            std::size_t points) {
  const Eigen::RowVectorXf even = weights.head(order.even_count()) * shapes.topRows(order.even_count());
  const Eigen::RowVectorXf odd = weights.tail(order.odd_count()) * shapes.bottomRows(order.odd_count());
  std::vector<float> frame(points);
  unfold({even.data(), static_cast<std::size_t>(even.size())},
         {odd.data(), static_cast<std::size_t>(odd.size())}, frame);
  return frame;
}

class Shapes : public testing::TestWithParam<std::size_t> {};

// The formulas at every point, in double, without any use of symmetry.
TEST_P(Shapes, UnfoldToTheirFormulasAtEveryPoint) {
  const Scenario scenario = make_scenario({.views_per_run = 1, .grid = GetParam()});
  const DemoGrid grid = make_grid(scenario);
  const ShapeOrder order(scenario);
  const SteadyLensing steady{.focus_m = 0.3, .astigmatism_m = -0.1, .coma_m = 0.2};
  const ShapeMatrix shapes = half_shapes(scenario, grid, steady, 1e6, -7.0F);
  Eigen::RowVectorXf weights = Eigen::RowVectorXf::Zero(order.count());
  weights[order.cosine(5)] = 0.3F;
  weights[order.sine(5)] = -0.2F;
  weights[order.sine(order.pairs - 1)] = 0.1F;
  weights[order.steady_even()] = weights[order.steady_odd()] = 1.0F;
  weights[order.piston()] = 0.5F;
  weights[order.tip()] = 2.0F;
  weights[order.tilt()] = -3.0F;

  const auto frame = unfolded(shapes, order, weights, grid.inside.size());

  const Wave wave = scenario.waves[5];
  const double radius = 0.075, roll_up = 2.0 * M_PI / scenario.roll_up.wavelength_m;
  for (std::size_t point = 0; point < frame.size(); ++point) {
    SCOPED_TRACE(point);
    const double x = grid.centers_m[point % grid.across], y = grid.centers_m[point / grid.across];
    if (std::hypot(x, y) > radius) {
      EXPECT_EQ(frame[point], -7.0F);
      continue;
    }
    const double u = x / radius, v = y / radius, angle = wave.kx_rad_m * x + wave.ky_rad_m * y;
    const double expected = 0.3 * std::cos(angle) - 0.2 * std::sin(angle) + 0.1 * std::sin(roll_up * x) +
                            0.5 + 2.0 * x - 3.0 * y + 0.3 * std::sqrt(3.0) * (2 * (u * u + v * v) - 1) -
                            0.1 * std::sqrt(6.0) * (u * u - v * v) +
                            0.2 * std::sqrt(8.0) * (3 * (u * u + v * v) - 2) * u;
    // Some ten roundings of numbers below 1e6.
    EXPECT_NEAR(static_cast<double>(frame[point]), 1e6 * expected, 10 * 0.06);
  }
}

INSTANTIATE_TEST_SUITE_P(EvenAndOddGrids, Shapes, testing::Values(16, 17));

TEST(Shapes, GridIsSymmetricToTheLastBit) {
  // 0.15 m in 30 points puts cell centers on the rim (3-4-5 triangles), where a rounding would decide.
  for (const std::size_t across : {8, 30, 50, 63, 100}) {
    const DemoGrid grid = make_grid(make_scenario({.views_per_run = 1, .grid = across}));
    for (std::size_t i = 0; i < across; ++i) EXPECT_EQ(grid.centers_m[i], -grid.centers_m[across - 1 - i]);
    for (std::size_t p = 0; p < grid.inside.size(); ++p) {
      EXPECT_EQ(grid.inside[p], grid.inside[grid.inside.size() - 1 - p]);
    }
  }
}

}  // namespace
}  // namespace bentlight::demo
