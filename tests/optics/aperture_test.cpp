#include "optics/aperture.h"

#include <gtest/gtest.h>

#include <numbers>

#include "support/optics_samples.h"

namespace bentlight::optics {

using test::disc;
using test::disc_grid;

TEST(Aperture, CountsItsPointsRowByRow) {
  Grid grid{.rows = 3,
            .columns = 4,
            .x_m = {0, 1, 2, 3},
            .y_m = {10, 20, 30},
            .mask = {0, 1, 1, 0,  //
                     1, 1, 0, 1,  //
                     0, 0, 0, 1}};

  const auto aperture = Aperture::of(grid).value();

  EXPECT_EQ(std::vector(aperture.x_m().begin(), aperture.x_m().end()),
            (std::vector<double>{1, 2, 0, 1, 3, 3}));
  EXPECT_EQ(std::vector(aperture.y_m().begin(), aperture.y_m().end()),
            (std::vector<double>{10, 10, 20, 20, 20, 30}));
  std::vector<std::uint32_t> runs;
  for (const auto& run : aperture.runs()) runs.insert(runs.end(), {run.first, run.count});
  EXPECT_EQ(runs, (std::vector<std::uint32_t>{1, 2, 4, 2, 7, 1, 11, 1}));
}

TEST(Aperture, OfADiscHasItsCenterRadiusAndArea) {
  const auto aperture = disc(0.2, 128);

  EXPECT_NEAR(aperture.center_x_m(), 0.0, 1e-12);
  EXPECT_NEAR(aperture.center_y_m(), 0.0, 1e-12);
  // The farthest center lies within a step of the rim; half a step is its cell's.
  EXPECT_NEAR(aperture.radius_m(), 0.1, 0.2 / 128);
  // Gauss's circle problem: the count of cells differs from the area by no more than the rim's cells.
  EXPECT_NEAR(static_cast<double>(aperture.points()), std::numbers::pi / 4 * 128 * 128, 128);
}

TEST(Aperture, RefusesPointsOnALineByName) {
  Grid grid{.rows = 3, .columns = 3, .x_m = {0, 1, 2}, .y_m = {0, 1, 2}, .mask = {1, 0, 0, 0, 1, 0, 0, 0, 1}};

  const auto aperture = Aperture::of(grid);

  ASSERT_FALSE(aperture);
  EXPECT_EQ(aperture.error().code, ErrorCode::degenerate_aperture);
}

TEST(Aperture, RefusesFewerThanThreePoints) {
  Grid grid{.rows = 1, .columns = 2, .x_m = {0, 1}, .y_m = {0}, .mask = {1, 1}};
  EXPECT_EQ(Aperture::of(grid).error().code, ErrorCode::degenerate_aperture);
}

TEST(Aperture, CutHoldsThePointsWhoseCentersAreInside) {
  const auto whole = disc(0.2, 64);

  const auto part = whole.cut({.diameter_m = 0.1, .obscuration = 0.4, .center_x_m = 0.02}).value();

  std::vector<std::size_t> expected;
  for (std::size_t p = 0; p < whole.points(); ++p) {
    const double distance_m = std::hypot(whole.x_m()[p] - 0.02, whole.y_m()[p]);
    if (distance_m <= 0.05 && distance_m >= 0.02) expected.push_back(p);
  }
  EXPECT_EQ(part.positions_in(whole), expected);
  EXPECT_NEAR(part.center_x_m(), 0.02, 1e-12);
  EXPECT_EQ(part.radius_m(), 0.05);
}

TEST(Aperture, CutOfNothingIsTheWhole) {
  const auto whole = disc(0.2, 32, 0.3);
  EXPECT_EQ(whole.cut({}).value().points(), whole.points());
}

TEST(Aperture, CutOfItsOwnDiameterIsTheWhole) {
  const auto whole = disc(0.2, 64);
  EXPECT_EQ(whole.cut({.diameter_m = 2 * whole.radius_m()}).value().points(), whole.points());
}

TEST(Aperture, CutBeyondTheLightIsRefused) {
  const auto whole = disc(0.2, 64);

  for (const ApertureCut& cut :
       {ApertureCut{.diameter_m = 0.25}, ApertureCut{.diameter_m = 0.15, .center_y_m = 0.04},
        ApertureCut{.diameter_m = 0.02, .center_x_m = 0.5}}) {
    const auto part = whole.cut(cut);
    ASSERT_FALSE(part);
    EXPECT_EQ(part.error().code, ErrorCode::aperture_outside_mask);
    EXPECT_EQ(part.error().subject, "aperture");
  }
}

TEST(Aperture, CutInsideTheObscurationIsRefused) {
  const auto annulus = disc(0.2, 64, 0.5);
  EXPECT_EQ(annulus.cut({.diameter_m = 0.06}).error().code, ErrorCode::aperture_outside_mask);
  EXPECT_TRUE(annulus.cut({.diameter_m = 0.16}));
}

TEST(Aperture, CutSmallerThanACellIsDegenerate) {
  EXPECT_EQ(disc(0.2, 32).cut({.diameter_m = 0.001}).error().code, ErrorCode::degenerate_aperture);
}

TEST(Aperture, ScattersValuesOntoTheGridAndLeavesNaNOutside) {
  const auto grid = disc_grid(0.2, 16);
  const auto aperture = Aperture::of(grid).value();
  std::vector<double> values(aperture.points());
  for (std::size_t p = 0; p < values.size(); ++p) values[p] = static_cast<double>(p);

  const auto scattered = aperture.on_grid(values);

  double next = 0;
  for (std::size_t i = 0; i < scattered.size(); ++i) {
    if (grid.mask[i] != 0) {
      EXPECT_EQ(scattered[i], next++);
    } else {
      EXPECT_TRUE(std::isnan(scattered[i]));
    }
  }
}

}  // namespace bentlight::optics
