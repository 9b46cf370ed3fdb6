#include "optics/moment_maps.h"

#include <gtest/gtest.h>

#include "optics/preparation.h"
#include "support/optics_samples.h"

namespace bentlight::optics {

using test::disc;
using test::rippled_frames;

namespace {

/// A prepared block: values as they are, no shift.
FrameBlock prepared(std::span<const std::vector<double>> frames) {
  FrameBlock block;
  block.resize({0, frames.size()}, frames.front().size());
  for (std::size_t f = 0; f < frames.size(); ++f) {
    block.shift_m[f] = 0.0;
    block.finite[f] = 1;
    std::ranges::transform(frames[f], block.frame(f).begin(),
                           [](double value) { return static_cast<float>(value); });
  }
  return block;
}

MomentMaps maps_of(std::span<const std::vector<double>> frames) {
  MomentAccumulator accumulator(frames.front().size());
  accumulator.add(prepared(frames));
  return accumulator.finish();
}

/// Two passes over the block's own floats, in long double.
MomentMaps exact_maps(const FrameBlock& block) {
  MomentMaps maps = MomentMaps::of(block.points);
  std::vector<long double> mean(block.points, 0.0L), m2(block.points, 0.0L);
  for (std::size_t f = 0; f < block.frames.count; ++f) maps.count += block.finite[f];
  for (std::size_t p = 0; p < block.points; ++p) {
    for (std::size_t f = 0; f < block.frames.count; ++f) {
      if (block.finite[f])
        mean[p] += static_cast<long double>(block.frame(f)[p]) / static_cast<long double>(maps.count);
    }
    for (std::size_t f = 0; f < block.frames.count; ++f) {
      const long double difference = static_cast<long double>(block.frame(f)[p]) - mean[p];
      if (block.finite[f]) m2[p] += difference * difference;
    }
    maps.mean[p] = static_cast<double>(mean[p]);
    maps.m2[p] = static_cast<double>(m2[p]);
  }
  return maps;
}

void expect_near(const MomentMaps& found, const MomentMaps& expected, double spread, double relative) {
  ASSERT_EQ(found.count, expected.count);
  for (std::size_t p = 0; p < expected.mean.size(); ++p) {
    ASSERT_NEAR(found.mean[p], expected.mean[p], relative * spread);
    ASSERT_NEAR(found.m2[p], expected.m2[p],
                relative * static_cast<double>(expected.count) * spread * spread);
  }
}

}  // namespace

TEST(MomentMaps, AreThoseOfTwoPassesInLongDouble) {
  const auto aperture = disc(0.2, 24);
  for (const std::size_t frames : {1UL, 2UL, 31UL, 32UL, 33UL, 200UL}) {
    SCOPED_TRACE(frames);
    const auto block = prepared(rippled_frames(aperture, frames, 1e-7, 3));

    MomentAccumulator accumulator(block.points);
    accumulator.add(block);

    // 32 float additions about a pilot: a few steps of 6e-8.
    expect_near(accumulator.finish(), exact_maps(block), 1e-7, 2e-6);
  }
}

// Sums of squares of such values in float would keep no digit of the spread.
TEST(MomentMaps, KeepTheirDigitsUnderALargeSteadyLensing) {
  const auto aperture = disc(0.2, 24);
  auto frames = rippled_frames(aperture, 200, 1e-7, 3);
  for (auto& frame : frames) {
    for (std::size_t p = 0; p < frame.size(); ++p) frame[p] += 1e-4 * aperture.x_m()[p] / 0.1 + 5e-5;
  }
  const auto block = prepared(frames);

  MomentAccumulator accumulator(block.points);
  accumulator.add(block);

  expect_near(accumulator.finish(), exact_maps(block), 1e-7, 2e-6);
}

TEST(MomentMaps, MergedAnywhereEqualNoSplit) {
  const auto aperture = disc(0.2, 12);
  const auto frames = rippled_frames(aperture, 150, 1e-7, 7);
  const auto whole = maps_of(frames);
  std::mt19937 random(99);
  for (int trial = 0; trial < 40; ++trial) {
    SCOPED_TRACE(trial);
    MomentMaps merged = MomentMaps::of(aperture.points());
    for (std::size_t first = 0; first < frames.size();) {
      const std::size_t count = std::min<std::size_t>(1 + random() % 60, frames.size() - first);
      merged.merge(maps_of(std::span(frames).subspan(first, count)));
      first += count;
    }
    expect_near(merged, whole, 1e-7, 2e-6);
  }
}

TEST(MomentMaps, MergedWithNothingAreThemselves) {
  const auto aperture = disc(0.2, 12);
  auto maps = maps_of(rippled_frames(aperture, 5, 1e-7, 7));
  const auto before = maps;

  maps.merge(MomentMaps::of(aperture.points()));

  EXPECT_EQ(maps.mean, before.mean);
  EXPECT_EQ(maps.m2, before.m2);
}

TEST(MomentMaps, OfDifferentAperturesDoNotMerge) {
  auto maps = MomentMaps::of(5);
  EXPECT_THROW(maps.merge({.count = 1, .mean = {1.0}, .m2 = {0.0}}), std::invalid_argument);
}

TEST(MomentMaps, LeaveOutFramesThatAreNotFinite) {
  const auto aperture = disc(0.2, 12);
  const auto frames = rippled_frames(aperture, 40, 1e-7, 7);
  auto block = prepared(frames);
  for (const std::size_t f : {0UL, 7UL, 8UL, 39UL}) {
    block.finite[f] = 0;
    std::ranges::fill(block.frame(f), 1e6F);
  }

  MomentAccumulator accumulator(block.points);
  accumulator.add(block);

  expect_near(accumulator.finish(), exact_maps(block), 1e-7, 2e-6);
}

TEST(MomentMaps, RmsAboutAMapIsThatOfTheDifferences) {
  const auto aperture = disc(0.2, 12);
  const auto frames = rippled_frames(aperture, 60, 1e-7, 7);
  const auto maps = maps_of(frames);
  const std::vector<double> center(aperture.points(), 4e-8);

  const auto about_center = maps.rms_about(center), about_zero = maps.rms_about({});

  for (std::size_t p = 0; p < aperture.points(); ++p) {
    double square = 0, raw = 0;
    for (const auto& frame : frames)
      square += std::pow(frame[p] - 4e-8, 2) / 60, raw += frame[p] * frame[p] / 60;
    EXPECT_NEAR(about_center[p], std::sqrt(square), 1e-6 * 1e-7);
    EXPECT_NEAR(about_zero[p], std::sqrt(raw), 1e-6 * 1e-7);
  }
}

TEST(MomentAccumulator, IsEmptyAfterItHasFinished) {
  const auto aperture = disc(0.2, 12);
  const auto block = prepared(rippled_frames(aperture, 40, 1e-7, 7));
  MomentAccumulator accumulator(block.points);
  accumulator.add(block);
  const auto first = accumulator.finish();

  accumulator.add(block);
  const auto second = accumulator.finish();

  EXPECT_EQ(second.count, first.count);
  EXPECT_EQ(second.mean, first.mean);
  EXPECT_EQ(second.m2, first.m2);
}

}  // namespace bentlight::optics
