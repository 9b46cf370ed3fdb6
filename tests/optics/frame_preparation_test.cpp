// Preparation against its slow twin in long double, and its properties.
#include <gtest/gtest.h>

#include <cstdio>
#include <limits>
#include <thread>

#include "optics/preparation.h"
#include "support/exact_removal.h"
#include "support/optics_samples.h"

namespace bentlight::optics {

using test::block_of;
using test::disc;
using test::rippled_frames;

namespace {

Removal removal(const char* text) {
  return parse_removal(text).value();
}

struct Prepared {
  FrameBlock block;
  std::vector<double> mean_square;
};

Prepared prepare(const Aperture& aperture,
                 const char* what,
                 std::span<const double> mean,
                 std::span<const std::vector<double>> frames) {
  const auto preparation = FramePreparation::make(aperture, removal(what), mean).value();
  FramePreparation::Scratch scratch;
  Prepared prepared{.block = block_of(frames)};
  preparation.prepare(prepared.block, scratch);
  prepared.mean_square = scratch.mean_square;
  return prepared;
}

/// Adds to each frame a piston, and a tilt of given rms in a direction of its own.
void disturb(std::vector<std::vector<double>>& frames,
             const Aperture& aperture,
             double piston_m,
             double tilt_m) {
  for (std::size_t t = 0; t < frames.size(); ++t) {
    const double angle = 0.7 * static_cast<double>(t);
    for (std::size_t p = 0; p < aperture.points(); ++p) {
      const double x = aperture.x_m()[p] / aperture.radius_m(), y = aperture.y_m()[p] / aperture.radius_m();
      frames[t][p] += piston_m + 2 * tilt_m * (std::cos(angle) * x + std::sin(angle) * y);
    }
  }
}

std::vector<double> mean_of(std::span<const std::vector<double>> frames) {
  std::vector<double> mean(frames.front().size(), 0.0);
  for (const auto& frame : frames) {
    for (std::size_t p = 0; p < mean.size(); ++p) mean[p] += frame[p] / static_cast<double>(frames.size());
  }
  return mean;
}

}  // namespace

TEST(FramePreparation, AgreesWithItsSlowTwinForEveryRemoval) {
  const auto aperture = disc(0.2, 40, 0.25);
  auto frames = rippled_frames(aperture, 70, 1e-7, 5);
  disturb(frames, aperture, 3e-6, 2e-6);
  const auto record_mean = mean_of(frames);
  const auto modes = test::exact_modes(aperture, 21);
  for (const char* what :
       {"none", "piston", "tilt", "mean", "piston,tilt", "piston,tilt,mean", "focus", "piston,focus",
        "tilt,mean", "piston,mean", "modes:2", "modes:4,mean", "modes:21", "modes:21,mean"}) {
    SCOPED_TRACE(what);
    const auto mean = removal(what).mean ? record_mean : std::vector<double>{};

    const auto prepared = prepare(aperture, what, mean, frames);

    for (std::size_t t = 0; t < frames.size(); ++t) {
      const auto exact = test::prepared_exactly(frames[t], mean, removal(what), modes);
      // Values of up to 1e-5 m are rounded to float (6e-13 m) on the way in, and a few times more on the way.
      for (std::size_t p = 0; p < exact.size(); ++p) {
        ASSERT_NEAR(prepared.block.frame(t)[p], static_cast<double>(exact[p]), 4e-12);
      }
      const auto rms = static_cast<double>(std::sqrt(test::mean_product(exact, exact)));
      // A thousand points average their roundings.
      ASSERT_NEAR(std::sqrt(prepared.mean_square[t]), rms, 2e-13 + 2e-7 * rms);
      ASSERT_EQ(prepared.block.shift_m[t], 0.0);
    }
  }
}

// The hard case: ripple of 0.1 um under a piston of 100 um and a tilt of 100 um rms. A naive sum of float
// squares keeps no digit here (relative error 1.9). A frame's values span 400 um, and rounding them to float
// alone leaves errors of 1e-11 m, 1e-4 of the ripple, at each point; 12,900 points average them to some 1e-6
// of the rms.
TEST(FramePreparation, KeepsSixDigitsUnderAThousandTimesTheRippleInPistonAndTilt) {
  const auto aperture = disc(0.2, 128);
  auto frames = rippled_frames(aperture, 16, 1e-7, 8);
  disturb(frames, aperture, 1e-4, 1e-4);
  const auto modes = test::exact_modes(aperture, 10);
  const auto rounded = block_of(frames);
  for (const char* what : {"piston,tilt", "modes:10"}) {
    const auto prepared = prepare(aperture, what, {}, frames);

    double worst_of_all = 0, worst_of_arithmetic = 0;
    for (std::size_t t = 0; t < frames.size(); ++t) {
      const auto error_against = [&](std::span<const double> frame) {
        const auto exact = test::prepared_exactly(frame, {}, removal(what), modes);
        const auto rms = static_cast<double>(std::sqrt(test::mean_product(exact, exact)));
        return std::abs(std::sqrt(prepared.mean_square[t]) / rms - 1);
      };
      worst_of_all = std::max(worst_of_all, error_against(frames[t]));
      const std::vector<double> as_rounded(rounded.frame(t).begin(), rounded.frame(t).end());
      worst_of_arithmetic = std::max(worst_of_arithmetic, error_against(as_rounded));
    }
    std::printf("[ error    ] %s: OPD_rms within %.1e of long double, %.1e with the rounding of the frames\n",
                what, worst_of_arithmetic, worst_of_all);
    EXPECT_LT(worst_of_arithmetic, 1e-6);
    EXPECT_LT(worst_of_all, 3e-6);
  }
}

TEST(FramePreparation, IsBlindToAnyPistonTipAndTilt) {
  const auto aperture = disc(0.2, 64);
  const auto still = rippled_frames(aperture, 3, 1e-6, 2);
  const auto expected = prepare(aperture, "piston,tilt", {}, still).mean_square;
  std::mt19937 random(20240607);
  std::normal_distribution<double> coefficient(0.0, 1e-5);
  for (int trial = 0; trial < 50; ++trial) {
    SCOPED_TRACE(trial);
    auto tilted = still;
    const double piston_m = coefficient(random), tilt_m = coefficient(random);
    disturb(tilted, aperture, piston_m, tilt_m);

    const auto prepared = prepare(aperture, "piston,tilt", {}, tilted);

    // One rounding of the largest value to float bounds the change of any point, hence of the rms.
    const double step_m = std::numeric_limits<float>::epsilon() * (1e-6 + 6 * std::abs(tilt_m));
    for (std::size_t t = 0; t < 3; ++t) {
      EXPECT_NEAR(std::sqrt(prepared.mean_square[t]), std::sqrt(expected[t]), step_m);
    }
  }
}

TEST(FramePreparation, ScalesTheRmsAsItScalesTheFrames) {
  const auto aperture = disc(0.2, 32);
  auto frames = rippled_frames(aperture, 10, 1e-7, 2);
  const auto once = prepare(aperture, "modes:6", {}, frames).mean_square;
  for (auto& frame : frames) {
    for (double& value : frame) value *= 8;
  }

  const auto scaled = prepare(aperture, "modes:6", {}, frames).mean_square;

  // Eight is a power of two: not a bit differs.
  for (std::size_t t = 0; t < 10; ++t) EXPECT_EQ(scaled[t], 64 * once[t]);
}

TEST(FramePreparation, WithoutRemovalGivesTheFramesWithTheirPiston) {
  const auto aperture = disc(0.2, 16);
  auto frames = rippled_frames(aperture, 5, 1e-7, 9);
  disturb(frames, aperture, 1e-4, 0);

  const auto prepared = prepare(aperture, "none", {}, frames);

  for (std::size_t t = 0; t < 5; ++t) {
    for (std::size_t p = 0; p < aperture.points(); ++p) {
      EXPECT_NEAR(prepared.block.frame(t)[p], frames[t][p], 1e-4 * std::numeric_limits<float>::epsilon());
    }
  }
}

TEST(FramePreparation, KeepsTheRippleWhereALargePistonIsKeptAndTheMeanGoes) {
  const auto aperture = disc(0.2, 32);
  auto frames = rippled_frames(aperture, 20, 1e-7, 9);
  disturb(frames, aperture, 1e-4, 0);
  const auto mean = mean_of(frames);

  const auto prepared = prepare(aperture, "mean", mean, frames);

  // The pistons of frames and mean cancel in double: what is left has the roundings of ripple, not of 100 um.
  for (std::size_t t = 0; t < 20; ++t) {
    for (std::size_t p = 0; p < mean.size(); ++p) {
      EXPECT_NEAR(prepared.block.frame(t)[p], frames[t][p] - mean[p], 2e-13);
    }
  }
}

TEST(FramePreparation, GivesZerosAndNoMeanSquareForFramesThatAreNotFinite) {
  const auto aperture = disc(0.2, 24);
  auto frames = rippled_frames(aperture, 9, 1e-7, 1);
  const auto whole = prepare(aperture, "modes:6", {}, frames);
  frames[0][0] = std::numeric_limits<double>::quiet_NaN();
  frames[4][17] = std::numeric_limits<double>::infinity();
  for (const char* what : {"modes:6", "none", "piston,tilt"}) {
    SCOPED_TRACE(what);

    const auto prepared = prepare(aperture, what, {}, frames);

    for (std::size_t t = 0; t < 9; ++t) {
      const bool is_bad = t == 0 || t == 4;
      EXPECT_EQ(prepared.block.finite[t] == 0, is_bad);
      EXPECT_EQ(std::isnan(prepared.mean_square[t]), is_bad);
      for (const float value : prepared.block.frame(t))
        ASSERT_TRUE(is_bad ? value == 0.0F : std::isfinite(value));
    }
  }
  const auto prepared = prepare(aperture, "modes:6", {}, frames);
  for (const std::size_t t : {1UL, 3UL, 5UL, 8UL}) {
    EXPECT_NEAR(prepared.mean_square[t], whole.mean_square[t], 1e-6 * whole.mean_square[t]);
  }
}

TEST(FramePreparation, WantsTheMeanThatItIsToRemoveAndNoOther) {
  const auto aperture = disc(0.2, 24);
  const std::vector<double> mean(aperture.points(), 0.0), other(7, 0.0);
  EXPECT_THROW(static_cast<void>(FramePreparation::make(aperture, removal("mean"), {})),
               std::invalid_argument);
  EXPECT_THROW(static_cast<void>(FramePreparation::make(aperture, removal("piston"), mean)),
               std::invalid_argument);
  EXPECT_THROW(static_cast<void>(FramePreparation::make(aperture, removal("mean"), other)),
               std::invalid_argument);
}

TEST(FramePreparation, RefusesABlockOfAnotherAperture) {
  const auto preparation = FramePreparation::make(disc(0.2, 24), removal("piston"), {}).value();
  auto block = block_of(rippled_frames(disc(0.2, 16), 2, 1e-7, 1));
  FramePreparation::Scratch scratch;
  EXPECT_THROW(preparation.prepare(block, scratch), std::invalid_argument);
}

TEST(FramePreparation, OfMoreModesThanPointsIsRefused) {
  const auto aperture = disc(0.2, 8);
  EXPECT_EQ(FramePreparation::make(aperture, removal("modes:100"), {}).error().code,
            ErrorCode::degenerate_aperture);
}

TEST(FramePreparation, GivesTheSameBitsFromAnyThreadAndAnySplit) {
  const auto aperture = disc(0.2, 32);
  const auto frames = rippled_frames(aperture, 64, 1e-7, 4);
  const auto preparation = FramePreparation::make(aperture, removal("piston,tilt"), {}).value();
  std::vector<std::vector<double>> found(4);
  const auto work = [&](std::size_t lane) {
    // Each lane cuts the frames into its own pieces, whole groups of four.
    const std::size_t piece = 4U << lane;
    FramePreparation::Scratch scratch;
    for (std::size_t first = 0; first < frames.size(); first += piece) {
      auto block = block_of(std::span(frames).subspan(first, piece), first);
      preparation.prepare(block, scratch);
      found[lane].insert(found[lane].end(), scratch.mean_square.begin(), scratch.mean_square.end());
    }
  };

  std::vector<std::thread> threads;
  for (std::size_t lane = 0; lane < 4; ++lane) threads.emplace_back(work, lane);
  for (auto& thread : threads) thread.join();

  for (std::size_t lane = 1; lane < 4; ++lane) EXPECT_EQ(found[lane], found[0]);
}

TEST(ModeCoefficients, AreTheMeansOfProductsAndPistonHoldsTheShift) {
  const auto aperture = disc(0.2, 40);
  const auto basis = ModeBasis::zernike(aperture, 10).value();
  std::vector<double> frame(aperture.points());
  for (std::size_t p = 0; p < frame.size(); ++p) {
    frame[p] = 1e-4 + 3e-5 * basis.mode(2)[p] + 1e-7 * basis.mode(5)[p] - 2e-8 * basis.mode(10)[p];
  }

  const auto c = mode_coefficients(block_of(std::vector<std::vector<double>>{frame}), basis, 10);

  const std::vector<double> expected = {1e-4, 3e-5, 0, 0, 1e-7, 0, 0, 0, 0, -2e-8};
  // Values span 1.2e-4 m and round to float by 4e-12 m, averaged over twelve hundred points.
  for (std::size_t k = 0; k < 10; ++k) EXPECT_NEAR(c[k], expected[k], 1e-12) << k + 1;
}

}  // namespace bentlight::optics
