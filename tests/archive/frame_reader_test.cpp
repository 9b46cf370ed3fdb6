#include "archive/frame_reader.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <sys/wait.h>
#include <unistd.h>

#include <algorithm>
#include <cmath>
#include <limits>
#include <thread>

#include "archive/probe_client.h"
#include "support/npy_values.h"
#include "support/wavefront_files.h"

namespace bentlight::archive {
namespace {

using test::Specimen;
using test::WavefrontFiles;

const PosixFileSystem files;
const ProbeClient probe(BENTLIGHT_PROBE);

optics::FrameBlock poisoned() {
  optics::FrameBlock block;
  block.resize({0, 64}, 400);
  std::ranges::fill(block.values, std::numeric_limits<float>::quiet_NaN());
  std::ranges::fill(block.shift_m, std::numeric_limits<double>::quiet_NaN());
  std::ranges::fill(block.finite, std::uint8_t{7});
  return block;
}

/// Numbers of an aperture's points in the grid, in point order.
std::vector<std::size_t> grid_points(const optics::Aperture& aperture) {
  std::vector<std::size_t> points;
  for (const auto& run : aperture.runs()) {
    for (std::uint32_t i = 0; i < run.count; ++i) points.push_back(run.first + i);
  }
  return points;
}

/// Compares a block with NumPy's [frames][rows][columns] in metres.
///
/// A value is the stored one minus the shift, rounded to float once, or for float32 in metres the exact
/// difference rounded once: half a step of float of the value (2^-24). The shift and NumPy's product carry a
/// few roundings of double on the whole, piston included: 4 * 2^-53 of it.
void expect_equal(const optics::FrameBlock& block,
                  const optics::Aperture& aperture,
                  const test::NpyValues& numpy) {
  const auto points = grid_points(aperture);
  const std::size_t frame_points = aperture.rows() * aperture.columns();
  ASSERT_EQ(block.points, points.size());
  for (std::size_t i = 0; i < block.frames.count; ++i) {
    const double* frame = numpy.values.data() + (block.frames.first + i) * frame_points;
    bool all_finite = true;
    for (std::size_t p = 0; p < points.size(); ++p) {
      const double expected = frame[points[p]];
      const double value = block.frame(i)[p];
      if (!std::isfinite(expected)) {
        all_finite = false;
        ASSERT_FALSE(std::isfinite(value)) << "frame " << i << " point " << p;
        continue;
      }
      const double tolerance =
          std::ldexp(std::abs(value), -24) + std::ldexp(std::abs(expected) + std::abs(block.shift_m[i]), -51);
      ASSERT_NEAR(value + block.shift_m[i], expected, tolerance) << "frame " << i << " point " << p;
    }
    ASSERT_EQ(block.finite[i], all_finite ? 1 : 0) << "frame " << i;
    if (std::isfinite(frame[points[0]])) {
      ASSERT_EQ(block.frame(i)[0], 0.0F) << "frame " << i << " is shifted by another value than its first";
    }
  }
}

/// The file's own light, and a disc that leaves out edges and crosses chunks.
std::vector<optics::Aperture> apertures(const optics::Grid& grid) {
  optics::Grid disc = grid;
  const double x = 0.55 * static_cast<double>(grid.columns), y = 0.4 * static_cast<double>(grid.rows);
  const double radius = 0.34 * static_cast<double>(std::min(grid.rows, grid.columns));
  for (std::size_t i = 0; i < disc.mask.size(); ++i) {
    const auto row = static_cast<double>(i / grid.columns), column = static_cast<double>(i % grid.columns);
    if (std::hypot(column - x, row - y) > radius) disc.mask[i] = 0;
  }
  return {optics::Aperture::of(grid).value(), optics::Aperture::of(disc).value()};
}

std::vector<optics::FrameRange> ranges(const FrameReader& reader) {
  const std::size_t frames = reader.frames(), natural = reader.natural_frames();
  std::vector<optics::FrameRange> ranges{
      {0, frames}, {frames - 1, 1}, {frames / 3, frames - frames / 3}, {0, 0}};
  for (std::size_t first = 0; first < frames; first += natural) {
    ranges.push_back({first, std::min(natural, frames - first)});
  }
  return ranges;
}

void expect_readable(const Specimen& specimen) {
  const auto file = probe.read_structure(files, specimen.path, specimen.layout);
  ASSERT_TRUE(file) << file.error().text;
  const auto numpy = test::load_npy(std::filesystem::path(specimen.path).replace_extension(".npy"));
  ASSERT_EQ(numpy.shape,
            (std::vector<std::size_t>{file->map.frames(), file->map.rows(), file->map.columns()}));
  const auto reader = FrameReader::open(files, specimen.path, file->map, file->identity);
  ASSERT_TRUE(reader) << reader.error().text;

  FrameReader::Scratch scratch;
  for (const optics::Aperture& aperture : apertures(file->grid)) {
    for (const optics::FrameRange range : ranges(*reader)) {
      optics::FrameBlock block = poisoned();
      const auto read = reader->read(range, aperture, block, scratch);
      ASSERT_TRUE(read) << read.error().text;
      ASSERT_EQ(block.frames, range);
      ASSERT_NO_FATAL_FAILURE(expect_equal(block, aperture, numpy)) << "frames from " << range.first;
    }
  }
  EXPECT_TRUE(reader->verify_unchanged());
}

TEST(FrameReader, GivesWhatNumPyReadsFromEveryKindOfFile) {
  const WavefrontFiles made;

  std::size_t readable = 0;
  for (const Specimen& specimen : made.all()) {
    if (!specimen.refused.empty()) continue;
    SCOPED_TRACE(specimen.name);
    expect_readable(specimen);
    ++readable;
  }

  EXPECT_GT(readable, 100);
}

struct Opened {
  WavefrontFile file;
  FrameReader reader;
  optics::Aperture aperture;
};

Opened opened(const std::filesystem::path& path) {
  auto file = probe.read_structure(files, path, Layout{}).value();
  auto reader = FrameReader::open(files, path, file.map, file.identity).value();
  auto aperture = optics::Aperture::of(file.grid).value();
  return {std::move(file), std::move(reader), std::move(aperture)};
}

TEST(FrameReader, ReadsTheSameFromSeveralThreadsAtOnce) {
  const WavefrontFiles made({"chunk_latest_5x7x4_all"});
  const Opened open = opened(made.all()[0].path);
  const auto numpy = test::load_npy(made.folder() / "chunk_latest_5x7x4_all.npy");

  std::vector<optics::FrameBlock> blocks(8);
  {
    std::vector<std::jthread> threads;
    for (auto& block : blocks) {
      threads.emplace_back([&] {
        FrameReader::Scratch scratch;
        for (int i = 0; i < 20; ++i) ASSERT_TRUE(open.reader.read({0, 23}, open.aperture, block, scratch));
      });
    }
  }

  for (const auto& block : blocks) expect_equal(block, open.aperture, numpy);
}

TEST(FrameReader, CountsTheStoredBytesOfARange) {
  const WavefrontFiles made({"chunk_earliest_8x12x10_none", "type_le_f8_plain"});
  const Opened chunked = opened(made.folder() / "chunk_earliest_8x12x10_none.h5");
  const Opened plain = opened(made.folder() / "type_le_f8_plain.h5");

  // Frames 7 and 8 lie in two chunks of 8 * 12 * 10 floats.
  EXPECT_EQ(chunked.reader.stored_bytes({7, 2}), 2U * 8 * 12 * 10 * 4);
  EXPECT_EQ(chunked.reader.stored_bytes({0, 0}), 0U);
  EXPECT_EQ(plain.reader.stored_bytes({7, 2}), 2U * 12 * 10 * 8);
  EXPECT_EQ(chunked.reader.natural_frames(), 8U);
  EXPECT_EQ(plain.reader.natural_frames(), 23U);  // 27 would fit 256 KiB, the file has fewer
}

TEST(FrameReader, RefusesARangeOrAnApertureThatIsNotTheFiles) {
  const WavefrontFiles made({"type_le_f4_plain", "one_frame"});
  const Opened open = opened(made.folder() / "type_le_f4_plain.h5");
  optics::FrameBlock block;
  FrameReader::Scratch scratch;
  optics::Grid other = open.file.grid;
  std::swap(other.rows, other.columns);
  std::swap(other.x_m, other.y_m);

  EXPECT_THROW((void)open.reader.read({0, 24}, open.aperture, block, scratch), std::invalid_argument);
  EXPECT_THROW((void)open.reader.read({SIZE_MAX, 2}, open.aperture, block, scratch), std::invalid_argument);
  EXPECT_THROW((void)open.reader.read({0, 1}, optics::Aperture::of(other).value(), block, scratch),
               std::invalid_argument);
}

void run_in_another_process(const std::function<void()>& body) {
  const pid_t child = ::fork();
  if (child == 0) {
    body();
    ::_exit(0);
  }
  int status = 0;
  ASSERT_EQ(::waitpid(child, &status, 0), child);
  ASSERT_EQ(status, 0);
}

TEST(FrameReader, SaysThatAFileWasCutShortWhileItWasRead) {
  for (const std::string name : {"type_le_f4_plain", "chunk_earliest_1x12x10_deflate"}) {
    SCOPED_TRACE(name);
    const WavefrontFiles made({name});
    const auto path = made.all()[0].path;
    const Opened open = opened(path);
    optics::FrameBlock block;
    FrameReader::Scratch scratch;
    ASSERT_TRUE(open.reader.read({0, 23}, open.aperture, block, scratch));

    run_in_another_process([&] { std::filesystem::resize_file(path, 3000); });

    const auto read = open.reader.read({0, 23}, open.aperture, block, scratch);
    ASSERT_FALSE(read);
    EXPECT_EQ(read.error().code, ErrorCode::file_changed);
    EXPECT_EQ(open.reader.verify_unchanged().error().code, ErrorCode::file_changed);
    EXPECT_EQ(FrameReader::open(files, path, open.file.map, open.file.identity).error().code,
              ErrorCode::file_changed);
  }
}

void overwrite(const std::filesystem::path& path, std::uint64_t offset, const std::string& bytes) {
  std::fstream stream(path, std::ios::binary | std::ios::in | std::ios::out);
  stream.seekp(static_cast<std::streamoff>(offset));
  stream << bytes;
}

TEST(FrameReader, TellsADamagedChunkFromAFileThatIsBeingRewritten) {
  const WavefrontFiles made({"chunk_earliest_8x12x10_sum"});
  const auto path = made.all()[0].path;
  {
    const Opened before = opened(path);
    overwrite(path, before.file.map.chunks[1].offset + 100, "rot");

    // Rewritten since it was opened.
    optics::FrameBlock block;
    FrameReader::Scratch scratch;
    EXPECT_EQ(before.reader.read({0, 23}, before.aperture, block, scratch).error().code,
              ErrorCode::file_changed);
  }

  const Opened open = opened(path);
  optics::FrameBlock block;
  FrameReader::Scratch scratch;
  const auto read = open.reader.read({0, 23}, open.aperture, block, scratch);

  ASSERT_FALSE(read);
  EXPECT_EQ(read.error().code, ErrorCode::damaged_file);
  EXPECT_THAT(read.error().text, testing::HasSubstr("checksum"));
  EXPECT_TRUE(open.reader.read({0, 8}, open.aperture, block, scratch));  // the chunk before is sound
}

}  // namespace
}  // namespace bentlight::archive
