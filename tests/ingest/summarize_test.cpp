#include "ingest/summarize.h"

#include <gtest/gtest.h>

#include <cmath>

#include "archive/probe_client.h"
#include "support/faulty_files.h"
#include "support/small_archive.h"
#include "support/temporary_folder.h"

namespace bentlight::ingest {
namespace {

namespace fs = std::filesystem;

struct Summarized {
  index::SummaryData data;
  std::uint64_t bytes_read = 0, bytes_done = 0, stored_bytes = 0;
};

Summarized summarized(const fs::path& path, std::size_t retained_bytes) {
  test::FileCounts counts;
  const test::FaultyFiles files(counts);
  const auto file = archive::ProbeClient(BENTLIGHT_PROBE).read_structure(files, path, {}).value();
  const auto reader = archive::FrameReader::open(files, path, file.map, file.identity).value();
  const auto aperture = optics::Aperture::of(file.grid).value();
  WorkPool pool(1);
  std::atomic<std::uint64_t> bytes_done{0};
  const test::TemporaryFolder folder;
  auto data = summarize_view(reader, file.grid, aperture, files, folder.path(),
                             {.retained_bytes = retained_bytes}, pool, {}, bytes_done)
                  .value();
  return {std::move(data), counts.bytes_read, bytes_done, reader.stored_bytes({0, reader.frames()})};
}

void expect_near(const std::vector<double>& a, const std::vector<double>& b, double tolerance) {
  ASSERT_EQ(a.size(), b.size());
  for (std::size_t i = 0; i < a.size(); ++i) ASSERT_NEAR(a[i], b[i], tolerance) << i;
}

// Chunks lie side by side in these files; a read may take in what lies between them, and a little more.
TEST(Summarizing, ReadsAFileOnceWhileItsFramesFit) {
  for (const char* name : {"tunnel/plain.h5", "tunnel/deflated.h5"}) {
    const Summarized summary = summarized(test::small_archive() / name, 1 << 30);

    EXPECT_EQ(summary.bytes_done, summary.stored_bytes) << name;
    EXPECT_LT(static_cast<double>(summary.bytes_read), 1.2 * static_cast<double>(summary.stored_bytes))
        << name;
  }
}

// The second pass then gets the frames as they are stored instead of without their plane: one more rounding
// to float of a few um, 2^-24 of that at each point, against a mean square of (0.2 um)^2.
TEST(Summarizing, ReadsFramesAgainThatItCouldNotKeep) {
  const auto path = test::small_archive() / "tunnel/deflated.h5";
  const Summarized kept = summarized(path, 1 << 30);
  for (const std::size_t retained_bytes : {0U, 300'000U}) {
    const Summarized again = summarized(path, retained_bytes);

    EXPECT_GT(again.bytes_read, kept.bytes_read);
    EXPECT_LE(again.bytes_read, 2 * kept.bytes_read);
    // Halves of odd pieces are rounded down.
    EXPECT_NEAR(static_cast<double>(again.bytes_done), static_cast<double>(kept.bytes_done), 100.0);
    EXPECT_EQ(again.data.coefficients, kept.data.coefficients);
    EXPECT_EQ(again.data.steady_lensing, kept.data.steady_lensing);
    const double tolerance = 2 * 2e-7 * std::ldexp(1.0, -24) * 5e-6;
    expect_near(again.data.residual_fluctuation, kept.data.residual_fluctuation, tolerance);
    expect_near(again.data.tilt_removed_fluctuation, kept.data.tilt_removed_fluctuation, tolerance);
  }
}

// An edge of a window is read frame by frame, its inside taken from blocks: both want whole chunks.
TEST(Summarizing, CutsBlocksAtChunkBorders) {
  const Summarized summary = summarized(test::small_archive() / "tunnel/deflated.h5", 1 << 30);

  EXPECT_EQ(summary.data.block_frames % 7, 0U);
  EXPECT_NEAR(static_cast<double>(summary.data.block_frames), 128.0, 3.5);
}

TEST(Summarizing, KeepsFewerModesWhereTheApertureTellsFewerApart) {
  const test::TemporaryFolder folder;
  std::vector<float> opd(30 * 9);
  for (std::size_t i = 0; i < opd.size(); ++i) opd[i] = 1e-7F * std::sin(0.7F * static_cast<float>(i * i));
  test::write_wavefront_file(folder.path() / "a.h5", opd, 3);

  const Summarized summary = summarized(folder.path() / "a.h5", 1 << 30);

  EXPECT_GE(summary.data.modes, 3U);
  EXPECT_LE(summary.data.modes, 9U);
}

TEST(Summarizing, StopsWhenAsked) {
  const PosixFileSystem files;
  const auto path = test::small_archive() / "tunnel/plain.h5";
  const auto file = archive::ProbeClient(BENTLIGHT_PROBE).read_structure(files, path, {}).value();
  const auto reader = archive::FrameReader::open(files, path, file.map, file.identity).value();
  const auto aperture = optics::Aperture::of(file.grid).value();
  WorkPool pool(1);
  std::stop_source stop;
  stop.request_stop();
  std::atomic<std::uint64_t> bytes_done{0};
  const test::TemporaryFolder folder;

  const auto summary = summarize_view(reader, file.grid, aperture, files, folder.path(), {}, pool,
                                      stop.get_token(), bytes_done);

  ASSERT_FALSE(summary);
  EXPECT_EQ(summary.error().code, ErrorCode::cancelled);
  EXPECT_EQ(bytes_done, 0U);
}

}  // namespace
}  // namespace bentlight::ingest
