#include "index/summary_store.h"

#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <fstream>
#include <limits>
#include <random>

#include "support/command.h"
#include "support/faulty_files.h"
#include "support/temporary_folder.h"

namespace bentlight::index {
namespace {

namespace fs = std::filesystem;
using optics::FrameRange;
using optics::MomentMaps;

MomentMaps any_maps(std::size_t count, std::size_t points, std::mt19937& random) {
  std::normal_distribution<double> normal;
  MomentMaps maps = MomentMaps::of(points);
  maps.count = count;
  for (double& mean : maps.mean) mean = 1e-6 * normal(random);
  for (double& m2 : maps.m2) m2 = 1e-14 * static_cast<double>(count) * std::abs(normal(random));
  return maps;
}

std::vector<double> any_series(std::size_t count, std::mt19937& random) {
  std::normal_distribution<double> normal;
  std::vector<double> series(count);
  for (double& value : series) value = normal(random);
  return series;
}

/// A summary of noise, written and opened.
class ASummary {
 public:
  ASummary(std::size_t blocks, std::size_t points, std::size_t block_frames = 10) : points_(points) {
    std::mt19937 random(static_cast<unsigned>(blocks));
    data.points = points;
    data.block_frames = block_frames;
    data.frames = blocks * block_frames - block_frames / 2;  // the last block is short
    data.modes = 5;
    data.rows = 3;
    data.columns = points;
    data.coefficients = any_series(data.modes * data.frames, random);
    for (auto* series :
         {&data.residual, &data.residual_fluctuation, &data.tilt_removed, &data.tilt_removed_fluctuation}) {
      *series = any_series(data.frames, random);
    }
    for (std::size_t t = 0; t < data.frames; ++t) data.finite.push_back(random() % 5 != 0);
    data.mean_coefficients = any_series(data.modes, random);
    data.steady_lensing = any_series(points, random);
    for (std::size_t i = 0; i < data.rows * data.columns; ++i) data.mask.push_back(random() % 2 == 0);
    fs::create_directory(staging_);
    auto writer = SummaryWriter::start(files, staging_, points, blocks).value();
    for (std::size_t b = 0; b < blocks; ++b) {
      // Now and then a block without a single finite frame.
      maps.push_back(any_maps(random() % 7 == 0 ? 0 : block_frames, points, random));
      if (maps.back().count == 0) maps.back() = MomentMaps::of(points);
      EXPECT_TRUE(writer.add_block(maps.back()));
    }
    EXPECT_TRUE(writer.finish(data));
    EXPECT_TRUE(SealedFolderWriter(files, staging_).seal());
    EXPECT_TRUE(files.publish_folder(staging_, final));
  }

  SummaryReader reader() const {
    return SummaryReader::open(SealedFolder::open(files, final).value()).value();
  }

  /// What merging the blocks one after another gives.
  MomentMaps merged(std::size_t first, std::size_t count) const {
    MomentMaps all = MomentMaps::of(points_);
    for (std::size_t b = first; b < first + count; ++b) all.merge(maps[b]);
    return all;
  }

 private:
  const test::TemporaryFolder folder_;
  const fs::path staging_ = folder_.path() / "staging";
  std::size_t points_;

 public:
  test::FileCounts counts;
  const test::FaultyFiles files{counts};
  const fs::path final = folder_.path() / "final";
  SummaryData data;
  std::vector<MomentMaps> maps;
};

// Means are about 1e-6 and kept as float, hence good to 2^-24 of the greatest; the spread of a few 1e-7
// between blocks turns that into 2^-24 · 4e-6 · 2 · 4e-6 to a frame at worst, beside the rounding of m2
// itself.
void expect_near(const MomentMaps& ours, const MomentMaps& expected) {
  const double step = std::ldexp(1.0, -24);
  ASSERT_EQ(ours.count, expected.count);
  for (std::size_t p = 0; p < expected.mean.size(); ++p) {
    ASSERT_NEAR(ours.mean[p], expected.mean[p], 4 * step * 4e-6) << p;
    ASSERT_NEAR(ours.m2[p], expected.m2[p],
                4 * step * (expected.m2[p] + static_cast<double>(expected.count) * 2 * 16e-12))
        << p;
  }
}

TEST(Summary, GivesTheMapsOfAnyBlocks) {
  for (const std::size_t blocks : {1U, 2U, 3U, 4U, 7U, 8U, 13U, 32U, 33U}) {
    const ASummary summary(blocks, 3);
    const SummaryReader reader = summary.reader();
    for (std::size_t first = 0; first <= blocks; ++first) {
      for (std::size_t count = 0; first + count <= blocks; ++count) {
        SCOPED_TRACE(fmt::format("{} blocks, {} from {}", blocks, count, first));
        const auto maps = reader.maps(first, count);
        ASSERT_TRUE(maps) << maps.error().text;
        expect_near(*maps, summary.merged(first, count));
      }
    }
  }
}

// A window of n blocks is at most 2 log2(n) nodes, each a mean and an m2 map in one or two pieces of 256 KiB,
// and one piece for its count.
TEST(Summary, ReadsFewNodesHoweverLongTheWindow) {
  const std::size_t blocks = 1000, points = 3000;
  const ASummary summary(blocks, points);
  const SummaryReader reader = summary.reader();
  std::uint64_t most = 0;
  for (const auto& [first, count] :
       {std::pair<std::size_t, std::size_t>{0, 1000}, {1, 998}, {511, 2}, {3, 700}}) {
    const std::uint64_t before = summary.counts.bytes_read;
    ASSERT_TRUE(reader.maps(first, count));
    most = std::max<std::uint64_t>(most, summary.counts.bytes_read - before);
  }

  EXPECT_LE(most, 20 * 5 * sealed_piece_bytes);
  EXPECT_GT(2 * blocks * points * sizeof(float), most / 2);  // or the bound would say nothing
}

TEST(Summary, GivesAnyPartOfItsSeries) {
  const ASummary summary(9, 4);
  const SummaryReader reader = summary.reader();
  const SummaryData& data = summary.data;
  std::mt19937 random(4);
  const auto part = [](const auto& all, std::size_t first, std::size_t count) {
    const auto begin = all.begin() + static_cast<std::ptrdiff_t>(first);
    return std::vector(begin, begin + static_cast<std::ptrdiff_t>(count));
  };
  for (int trial = 0; trial < 50; ++trial) {
    const std::size_t first = random() % data.frames, count = random() % (data.frames - first + 1);
    const FrameRange range{first, count};
    for (std::size_t k = 1; k <= data.modes; ++k) {
      EXPECT_EQ(reader.coefficient(k, range), part(data.coefficients, (k - 1) * data.frames + first, count));
    }
    EXPECT_EQ(reader.residual(range, false), part(data.residual, first, count));
    EXPECT_EQ(reader.residual(range, true), part(data.residual_fluctuation, first, count));
    EXPECT_EQ(reader.tilt_removed(range, false), part(data.tilt_removed, first, count));
    EXPECT_EQ(reader.tilt_removed(range, true), part(data.tilt_removed_fluctuation, first, count));
    EXPECT_EQ(reader.finite(range), part(data.finite, first, count));
  }
  EXPECT_EQ(reader.mean_coefficients(), data.mean_coefficients);
  EXPECT_EQ(reader.steady_lensing(), data.steady_lensing);
  EXPECT_EQ(reader.mask(), data.mask);
  EXPECT_EQ(reader.frames(), data.frames);
  EXPECT_EQ(reader.modes(), data.modes);
  EXPECT_EQ(reader.points(), data.points);
  EXPECT_EQ(reader.block_frames(), data.block_frames);
}

TEST(Summary, ReadsOnlyWhatIsAskedFor) {
  const ASummary summary(2000, 2, 100);
  const SummaryReader reader = summary.reader();
  const std::uint64_t before = summary.counts.bytes_read;

  ASSERT_TRUE(reader.coefficient(3, {100'000, 1000}));

  // 8 kB out of 8 MB: they touch two pieces at most.
  EXPECT_LE(summary.counts.bytes_read - before, 2 * sealed_piece_bytes);
}

TEST(Summary, ThatIsDamagedSaysSoWhenThePartIsRead) {
  const ASummary summary(4, 3);
  std::fstream stream(summary.final / "residual.npy", std::ios::in | std::ios::out | std::ios::binary);
  stream.seekp(130);
  stream.put('!');
  stream.close();
  const SummaryReader reader = summary.reader();

  EXPECT_TRUE(reader.tilt_removed({0, 5}, false));
  EXPECT_EQ(reader.residual({0, 5}, false).error().code, ErrorCode::damaged_state);
}

TEST(Summary, OfAnotherVersionIsNotRead) {
  const test::TemporaryFolder folder;
  const PosixFileSystem files;
  ASSERT_TRUE(files.create(folder.path() / "summary.json", as_bytes(R"({"version": 2, "frames": 1})")));
  ASSERT_TRUE(SealedFolderWriter(files, folder.path()).seal());

  const auto reader = SummaryReader::open(SealedFolder::open(files, folder.path()).value());

  ASSERT_FALSE(reader);
  EXPECT_EQ(reader.error().code, ErrorCode::damaged_state);
}

TEST(Summary, IsMadeOfFilesThatNumPyReads) {
  const ASummary summary(6, 7);

  const auto finished = testing_support::run(fmt::format(
      "cd '{}' && /usr/bin/python3 -c \"import numpy as np\nfor n in ['coefficients', 'residual', 'finite', "
      "'native_mask', 'node_count', 'node_mean', 'node_m2']: a = np.load(n + '.npy'); print(n, a.dtype.str, "
      "a.shape)\"",
      summary.final.string()));

  // 6 blocks make 6 + 3 + 1 nodes.
  EXPECT_EQ(finished.output,
            "coefficients <f8 (5, 55)\nresidual <f8 (55,)\nfinite |u1 (55,)\nnative_mask |u1 (3, 7)\n"
            "node_count <i8 (10,)\nnode_mean <f4 (10, 7)\nnode_m2 <f4 (10, 7)\n");
}

TEST(Summary, SaysWhenTheDiskIsFull) {
  const test::TemporaryFolder folder;
  test::FileCounts counts;
  const test::FaultyFiles files(counts);
  std::mt19937 random(1);
  auto writer = SummaryWriter::start(files, folder.path(), 1000, 10).value();
  counts.room = 10'000;

  Expected<void> added;
  for (int b = 0; added && b < 10; ++b) added = writer.add_block(any_maps(3, 1000, random));

  ASSERT_FALSE(added);
  EXPECT_EQ(added.error().code, ErrorCode::disk_full);
}

TEST(Summary, CountsItsBlocks) {
  const test::TemporaryFolder folder;
  const PosixFileSystem files;
  std::mt19937 random(1);
  auto writer = SummaryWriter::start(files, folder.path(), 3, 2).value();
  ASSERT_TRUE(writer.add_block(any_maps(3, 3, random)));

  EXPECT_THROW(static_cast<void>(writer.finish({})), std::invalid_argument);
  ASSERT_TRUE(writer.add_block(any_maps(3, 3, random)));
  EXPECT_THROW(static_cast<void>(writer.add_block(any_maps(3, 3, random))), std::invalid_argument);
}

}  // namespace
}  // namespace bentlight::index
