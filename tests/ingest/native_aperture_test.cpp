#include "ingest/native_aperture.h"

#include <gtest/gtest.h>

#include <cmath>
#include <limits>
#include <numeric>
#include <random>

#include "archive/probe_client.h"
#include "support/small_archive.h"
#include "support/temporary_folder.h"

namespace bentlight::ingest {
namespace {

constexpr std::size_t across = 6, points = across * across;
constexpr float nan = std::numeric_limits<float>::quiet_NaN();

class ANativeAperture : public testing::Test {
 protected:
  static std::vector<float> noise(std::size_t frames) {
    std::mt19937 random(1);
    std::normal_distribution<float> normal(5e-5F, 1e-7F);
    std::vector<float> opd(frames * points);
    for (float& value : opd) value = normal(random);
    return opd;
  }

  Expected<NativeAperture> of(const std::vector<float>& opd) const {
    const auto path = folder_.path() / "a.h5";
    test::write_wavefront_file(path, opd, across);
    const PosixFileSystem files;
    const archive::ProbeClient probe(BENTLIGHT_PROBE);
    const auto file = probe.read_structure(files, path, {});
    if (!file) return failure(file);
    const auto reader = archive::FrameReader::open(files, path, file->map, file->identity).value();
    WorkPool pool(1);
    return native_aperture(*file, reader, pool, {});
  }

  static std::size_t lit(const NativeAperture& native) {
    return std::accumulate(native.grid.mask.begin(), native.grid.mask.end(), std::size_t{0});
  }

  const test::TemporaryFolder folder_;
};

TEST_F(ANativeAperture, IsTheWholeGridWhenAllIsFinite) {
  const auto native = of(noise(100));

  ASSERT_TRUE(native) << native.error().text;
  EXPECT_EQ(lit(*native), points);
  EXPECT_EQ(native->dead_points, 0U);
}

TEST_F(ANativeAperture, LeavesOutPointsThatAreMostlyNaN) {
  for (const std::size_t frames : {3U, 15U, 1000U}) {
    SCOPED_TRACE(frames);
    auto opd = noise(frames);
    for (std::size_t t = 0; t < frames; ++t) {
      opd[t * points + 7] = nan;
      if (t % 10 != 0) opd[t * points + 8] = nan;
      if (t % 10 == 0) opd[t * points + 9] = nan;
    }

    const auto native = of(opd);

    ASSERT_TRUE(native) << native.error().text;
    EXPECT_EQ(native->grid.mask[7], 0);
    EXPECT_EQ(native->grid.mask[8], 0);
    EXPECT_EQ(native->grid.mask[9], 1);
    EXPECT_EQ(lit(*native), points - 2);
  }
}

TEST_F(ANativeAperture, DoesNotCountFramesWithoutAnyLight) {
  auto opd = noise(20);
  std::fill(opd.begin() + 5 * points, opd.end(), nan);

  EXPECT_EQ(lit(of(opd).value()), points);
}

TEST_F(ANativeAperture, CountsPointsThatDoNotMove) {
  auto opd = noise(200);
  for (std::size_t t = 0; t < 200; ++t) opd[t * points + 3] = opd[t * points + 20] = 4.9e-5F;

  EXPECT_EQ(of(opd).value().dead_points, 2U);
}

TEST_F(ANativeAperture, CallsNoPointDeadOnTheEvidenceOfAFewFrames) {
  EXPECT_EQ(of(std::vector<float>(3 * points, 5e-5F)).value().dead_points, 0U);
}

}  // namespace
}  // namespace bentlight::ingest
