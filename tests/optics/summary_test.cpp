#include "optics/summary.h"

#include <gtest/gtest.h>

#include <cstdio>
#include <limits>

#include "support/exact_removal.h"
#include "support/optics_samples.h"

namespace bentlight::optics {

using test::block_of;
using test::disc;
using test::rippled_frames;

namespace {

constexpr std::size_t summary_modes = 21;

/// A record whose frames have a steady lensing, a jitter much larger than the ripple, and pistons.
std::vector<std::vector<double>> record(const Aperture& aperture, std::size_t frames, double jitter_m) {
  auto values = rippled_frames(aperture, frames, 1e-7, 12);
  for (std::size_t t = 0; t < frames; ++t) {
    const double tip = jitter_m * std::sin(0.3 * static_cast<double>(t)),
                 tilt = jitter_m * std::cos(0.21 * static_cast<double>(t));
    for (std::size_t p = 0; p < aperture.points(); ++p) {
      const double x = aperture.x_m()[p] / aperture.radius_m(), y = aperture.y_m()[p] / aperture.radius_m();
      values[t][p] += 5e-5 + tip * x + tilt * y + 2e-7 * (x * x * x - 2 * y * y) + 1e-7 * x * y;
    }
  }
  return values;
}

/// What the indexer does: two passes over blocks, put together.
struct Summary {
  std::vector<double> coefficients;  // [modes][frames]
  std::vector<double> residual, residual_fluctuation, tilt_removed, tilt_removed_fluctuation;
  std::vector<double> mean_coefficients;
  MomentMaps maps;

  /// Mean square of each frame after `removal`, by the formulas of optics/summary.h.
  std::vector<double> mean_squares(const Removal& removal) const {
    const std::size_t frames = residual.size();
    auto squares = removal.mean ? residual_fluctuation : residual;
    for (std::size_t k = 0; k < mean_coefficients.size(); ++k) {
      if (removal.has(k + 1)) continue;
      for (std::size_t t = 0; t < frames; ++t) {
        const double c = coefficients[k * frames + t] - (removal.mean ? mean_coefficients[k] : 0.0);
        squares[t] += c * c;
      }
    }
    return squares;
  }
};

Summary summarise(const Aperture& aperture,
                  std::span<const std::vector<double>> frames,
                  std::size_t block_frames) {
  const auto basis = ModeBasis::zernike(aperture, summary_modes).value();
  const std::size_t count = frames.size();
  Summary summary{.coefficients = std::vector<double>(summary_modes * count),
                  .maps = MomentMaps::of(aperture.points())};
  BlockSummarizer summarizer(basis);
  for (std::size_t first = 0; first < count; first += block_frames) {
    auto block = block_of(frames.subspan(first, std::min(block_frames, count - first)), first);
    const auto part = summarizer.summarize(block);
    for (std::size_t k = 0; k < summary_modes; ++k) {
      for (std::size_t f = 0; f < part.frames.count; ++f) {
        summary.coefficients[k * count + first + f] = part.coefficients[k * part.frames.count + f];
      }
    }
    summary.residual.insert(summary.residual.end(), part.residual.begin(), part.residual.end());
    summary.tilt_removed.insert(summary.tilt_removed.end(), part.tilt_removed.begin(),
                                part.tilt_removed.end());
    summary.maps.merge(part.maps);
  }
  for (std::size_t k = 0; k < summary_modes; ++k) {
    double sum = 0.0;
    for (std::size_t t = 0; t < count; ++t) sum += summary.coefficients[k * count + t];
    summary.mean_coefficients.push_back(sum / static_cast<double>(summary.maps.count));
  }
  auto fluctuation =
      BlockFluctuation::make(aperture, basis, summary.maps.mean, summary.mean_coefficients).value();
  for (std::size_t first = 0; first < count; first += block_frames) {
    auto block = block_of(frames.subspan(first, std::min(block_frames, count - first)), first);
    std::vector<double> c;
    for (std::size_t k = 0; k < summary_modes; ++k) {
      for (std::size_t f = 0; f < block.frames.count; ++f)
        c.push_back(summary.coefficients[k * count + first + f]);
    }
    const auto part = fluctuation.add(block, c);
    auto& residual = summary.residual_fluctuation;
    auto& tilt_removed = summary.tilt_removed_fluctuation;
    residual.insert(residual.end(), part.residual.begin(), part.residual.end());
    tilt_removed.insert(tilt_removed.end(), part.tilt_removed.begin(), part.tilt_removed.end());
  }
  return summary;
}

std::vector<double> mean_map(std::span<const std::vector<double>> frames) {
  std::vector<double> mean(frames.front().size(), 0.0);
  for (const auto& frame : frames) {
    for (std::size_t p = 0; p < mean.size(); ++p) mean[p] += frame[p] / static_cast<double>(frames.size());
  }
  return mean;
}

}  // namespace

TEST(Summary, AnswersEveryRemovalAsTheFramesWould) {
  const auto aperture = disc(0.2, 48, 0.2);
  const auto frames = record(aperture, 77, 3e-6);
  const auto summary = summarise(aperture, frames, 40);
  const auto modes = test::exact_modes(aperture, summary_modes);
  const auto mean = mean_map(frames);
  for (const char* text :
       {"piston,tilt,mean", "piston,tilt", "piston", "none", "mean", "tilt,mean", "modes:4", "modes:4,mean",
        "piston,focus,mean", "modes:15,mean", "modes:21", "modes:21,mean"}) {
    SCOPED_TRACE(text);
    const auto removal = parse_removal(text).value();
    ASSERT_TRUE(summary_knows(removal, summary_modes));

    const auto squares = summary.mean_squares(removal);

    for (std::size_t t = 0; t < frames.size(); ++t) {
      const auto exact =
          test::prepared_exactly(frames[t], removal.mean ? mean : std::vector<double>{}, removal, modes);
      const auto rms = static_cast<double>(std::sqrt(test::mean_product(exact, exact)));
      // The frames' values reach 1e-5 m and round to float by 6e-13 m: 1e-5 of the ripple, averaged over the
      // points.
      ASSERT_NEAR(std::sqrt(squares[t]), rms, 2e-6 * rms + 3e-14);
    }
  }
}

TEST(Summary, HoldsTheMapsOfFramesWithoutPlane) {
  const auto aperture = disc(0.2, 32);
  const auto frames = record(aperture, 90, 1e-6);
  const auto summary = summarise(aperture, frames, 32);
  const auto modes = test::exact_modes(aperture, 3);
  const auto removal = parse_removal("piston,tilt").value();
  std::vector<double> mean(aperture.points(), 0.0), square(aperture.points(), 0.0);
  for (const auto& frame : frames) {
    const auto exact = test::prepared_exactly(frame, {}, removal, modes);
    for (std::size_t p = 0; p < mean.size(); ++p) {
      mean[p] += static_cast<double>(exact[p]) / 90,
          square[p] += static_cast<double>(exact[p] * exact[p]) / 90;
    }
  }

  const auto rms = summary.maps.rms_about({});

  // Each frame rounds to float by 6e-13 m at most, and so does the mean.
  for (std::size_t p = 0; p < mean.size(); ++p) {
    EXPECT_NEAR(summary.maps.mean[p], mean[p], 3e-13);
    EXPECT_NEAR(rms[p], std::sqrt(square[p]), 3e-13);
  }
}

TEST(Summary, HoldsMeanSquaresWithoutPlane) {
  const auto aperture = disc(0.2, 32);
  const auto frames = record(aperture, 50, 1e-6);

  const auto summary = summarise(aperture, frames, 50);

  const auto kept = summary.mean_squares({.mean = false, .modes = {1, 2, 3}});
  const auto taken = summary.mean_squares({.mean = true, .modes = {1, 2, 3}});
  for (std::size_t t = 0; t < 50; ++t) {
    EXPECT_NEAR(summary.tilt_removed[t], kept[t], 2e-6 * kept[t]);
    EXPECT_NEAR(summary.tilt_removed_fluctuation[t], taken[t], 2e-6 * taken[t]);
  }
}

// The less the modes leave, the fewer digits a difference would keep of it; the rest itself keeps them.
TEST(Summary, KeepsTheDigitsOfAResidualHoweverSmall) {
  const auto aperture = disc(0.2, 64);
  const auto basis = ModeBasis::zernike(aperture, summary_modes).value();
  const auto ripple = rippled_frames(aperture, 32, 1e-7, 6);
  const auto modes = test::exact_modes(aperture, summary_modes);
  const Removal all = parse_removal("modes:21").value();
  for (const double height : {1e-7, 3e-7, 1e-6, 1e-5, 1e-4}) {
    auto frames = ripple;
    for (std::size_t t = 0; t < frames.size(); ++t) {
      for (std::size_t p = 0; p < aperture.points(); ++p) {
        frames[t][p] += height * (basis.mode(4)[p] + 0.5 * basis.mode(6 + t % 10)[p]);
      }
    }
    auto block = block_of(frames);
    BlockSummarizer summarizer(basis);

    const auto summary = summarizer.summarize(block);

    double worst = 0, share = 1;
    for (std::size_t t = 0; t < frames.size(); ++t) {
      const auto exact = test::prepared_exactly(frames[t], {}, all, modes);
      const auto rms = static_cast<double>(std::sqrt(test::mean_product(exact, exact)));
      worst = std::max(worst, std::abs(std::sqrt(summary.residual[t]) / rms - 1));
      share = std::min(share, summary.residual[t] / summary.tilt_removed[t]);
    }
    std::printf("[ error    ] modes leave %.0e of the mean square: %.1e of the residual's rms\n", share,
                worst);
    // A difference of float products good to 1e-7 of the whole; beyond, the rounding of the frame at each
    // point, 6e-8 of a few heights, averaged over three thousand points.
    EXPECT_LT(worst, 3e-6 + 1e-8 * height / 1e-7);
  }
}

TEST(Summary, LeavesOutFramesThatAreNotFinite) {
  const auto aperture = disc(0.2, 24);
  auto frames = record(aperture, 40, 1e-6);
  const auto whole = summarise(aperture, frames, 40);
  frames[3][5] = std::numeric_limits<double>::quiet_NaN();
  const auto basis = ModeBasis::zernike(aperture, summary_modes).value();
  auto block = block_of(frames);
  BlockSummarizer summarizer(basis);

  const auto summary = summarizer.summarize(block);

  EXPECT_EQ(summary.maps.count, 39U);
  EXPECT_EQ(summary.finite[3], 0);
  EXPECT_EQ(summary.residual[3], 0.0);
  EXPECT_EQ(summary.tilt_removed[3], 0.0);
  for (std::size_t k = 0; k < summary_modes; ++k) EXPECT_EQ(summary.coefficients[k * 40 + 3], 0.0);
  for (const std::size_t t : {0UL, 2UL, 4UL, 39UL}) {
    EXPECT_NEAR(summary.residual[t], whole.residual[t], 1e-6 * whole.residual[t]);
  }
}

TEST(Summary, OfABasisOfThreeModesHasTheRestAsResidual) {
  const auto aperture = disc(0.2, 24);
  const auto basis = ModeBasis::zernike(aperture, 3).value();
  auto block = block_of(record(aperture, 10, 1e-6));
  BlockSummarizer summarizer(basis);

  const auto summary = summarizer.summarize(block);

  EXPECT_EQ(summary.residual, summary.tilt_removed);
}

TEST(Summary, OfFramesThatAreFlatIsZeroBesidesPiston) {
  const auto aperture = disc(0.2, 24);
  const auto basis = ModeBasis::zernike(aperture, summary_modes).value();
  auto block = block_of(std::vector(5, std::vector<double>(aperture.points(), 2e-5)));
  BlockSummarizer summarizer(basis);

  const auto summary = summarizer.summarize(block);

  for (std::size_t f = 0; f < 5; ++f) {
    EXPECT_EQ(summary.coefficients[f], 2e-5);
    EXPECT_EQ(summary.residual[f], 0.0);
  }
}

TEST(Summary, KnowsRemovalsOfItsModesOnly) {
  EXPECT_TRUE(summary_knows(parse_removal("none").value(), 36));
  EXPECT_TRUE(summary_knows(parse_removal("modes:36,mean").value(), 36));
  EXPECT_FALSE(summary_knows(parse_removal("modes:37").value(), 36));
}

}  // namespace bentlight::optics
