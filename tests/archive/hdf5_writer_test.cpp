// What Hdf5Writer writes, read back by h5py and the HDF5 command-line tools (a different front of the
// reference library) and by zlib's inflate inside it: none of our own code reads here.
#include "archive/hdf5_writer.h"

#include <fcntl.h>
#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <unistd.h>

#include <array>
#include <cstdio>
#include <cstdlib>
#include <filesystem>
#include <fstream>
#include <functional>
#include <numeric>
#include <random>
#include <string>
#include <thread>

#include "support/command.h"

namespace bentlight::archive {
namespace {

using std::uint64_t;
using testing_support::run;

class Hdf5WriterFiles : public testing::Test {
 protected:
  void SetUp() override {
    folder_ = std::filesystem::temp_directory_path() / fmt::format("bentlight-hdf5-writer-{}", ::getpid());
    std::filesystem::create_directories(folder_);
  }
  void TearDown() override { std::filesystem::remove_all(folder_); }

  std::filesystem::path path(const std::string& name = "test.h5") const { return folder_ / name; }

  /// What a few lines of Python print, with the file open as `f`.
  std::string python(const std::string& lines, const std::string& name = "test.h5") const {
    const auto script = path("read.py");
    std::ofstream(script) << "import h5py, numpy as np, sys\nf = h5py.File(sys.argv[1], 'r')\n" << lines;
    return run(fmt::format("/usr/bin/python3 {} {}", script.string(), path(name).string())).output;
  }

  std::filesystem::path folder_;
};

/// A ramp with a little noise, so that filters have something to do: value of element i is i + noise in
/// float.
std::vector<float> ramp(std::size_t count) {
  std::vector<float> values(count);
  std::mt19937 random(1);
  std::uniform_real_distribution<float> noise(0.0F, 0.25F);
  for (std::size_t i = 0; i < count; ++i) values[i] = static_cast<float>(i) + noise(random);
  return values;
}

std::string bytes_of(const std::filesystem::path& path) {
  std::ifstream file(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(file), {}};
}

TEST_F(Hdf5WriterFiles, EveryElementTypeAndShapeReadsBackInPython) {
  auto writer = Hdf5Writer::create(path()).value();

  ASSERT_TRUE(writer.dataset<double>("/time", std::array<uint64_t, 1>{3}, std::array{0.5, 1.0, 1.0 / 3.0}));
  ASSERT_TRUE(writer.dataset<float>("/a/b/c", std::array<uint64_t, 2>{2, 1}, std::array{0.1F, -2.0F}));
  ASSERT_TRUE(
      writer.dataset<std::uint8_t>("/mask", std::array<uint64_t, 1>{2}, std::array<std::uint8_t, 2>{0, 255}));
  ASSERT_TRUE(writer.dataset<std::int64_t>("/n", {}, std::array<std::int64_t, 1>{-(std::int64_t{1} << 40)}));
  ASSERT_TRUE(writer.dataset<float>("/none", std::array<uint64_t, 1>{0}, {}));
  ASSERT_TRUE(writer.close());

  EXPECT_EQ(
      python("t = f['time']; print(t.dtype, t[2] == 1/3, f['a/b/c'].dtype, f['a/b/c'][:].tolist(),\n"
             "      f['mask'][:].tolist(), f['mask'].dtype, f['n'][()], f['n'].dtype, f['none'].shape)\n"),
      "float64 True float32 [[0.10000000149011612], [-2.0]] [0, 255] uint8 -1099511627776 int64 (0,)\n");
}

TEST_F(Hdf5WriterFiles, AttributesKeepTheirTypesAndAnyText) {
  auto writer = Hdf5Writer::create(path()).value();
  ASSERT_TRUE(writer.dataset<float>("/opd", std::array<uint64_t, 1>{1}, std::array{1.0F}));

  ASSERT_TRUE(writer.attribute("/", "note", std::string("Kuppel in µm, \"so\"")));
  ASSERT_TRUE(writer.attribute("/", "empty", std::string()));
  ASSERT_TRUE(writer.attribute("/opd", "sign", std::int64_t{1}));
  ASSERT_TRUE(writer.attribute("/opd", "mach", 0.25));
  ASSERT_TRUE(writer.attribute("/opd", "mach", 0.45));  // the later one holds
  ASSERT_TRUE(writer.close());

  EXPECT_EQ(
      python("a = dict(f.attrs); b = dict(f['opd'].attrs)\n"
             "print(ascii(a['note']), repr(a['empty']), b['sign'], type(b['sign']).__name__, b['mach'])\n"),
      "'Kuppel in \\xb5m, \"so\"' '' 1 int64 0.45\n");
}

struct StorageCase {
  std::string name;
  DatasetStorage storage;
  uint64_t piece;  // frames to an append
};

class Hdf5WriterStorage : public Hdf5WriterFiles, public testing::WithParamInterface<StorageCase> {};

TEST_P(Hdf5WriterStorage, GivesBackWhatWasAppended) {
  const std::array<uint64_t, 3> shape = {10, 5, 6};
  const auto values = ramp(10 * 5 * 6);
  auto writer = Hdf5Writer::create(path()).value();

  ASSERT_TRUE(writer.begin<float>("/opd", shape, GetParam().storage));
  for (uint64_t first = 0; first < 10; first += GetParam().piece) {
    const uint64_t count = std::min(GetParam().piece, 10 - first);
    const auto piece = std::span<const float>(values).subspan(first * 30, count * 30);
    ASSERT_TRUE(writer.append("/opd", first, count, piece));
  }
  ASSERT_TRUE(writer.close());

  std::ofstream raw(path("values.bin"), std::ios::binary);
  raw.write(reinterpret_cast<const char*>(values.data()), static_cast<std::streamsize>(values.size() * 4));
  raw.close();
  EXPECT_EQ(
      python(fmt::format("v = np.fromfile('{}', np.float32).reshape(10, 5, 6); d = f['opd']\n"
                         "print((d[:] == v).all(), d.chunks, d.compression_opts, d.shuffle, d.fletcher32)\n",
                         path("values.bin").string())),
      fmt::format(
          "True {} {} {} {}\n",
          GetParam().storage.chunk.empty()
              ? "None"
              : fmt::format("({}, {}, {})", GetParam().storage.chunk[0], GetParam().storage.chunk[1],
                            GetParam().storage.chunk[2]),
          GetParam().storage.deflate_level > 0 ? fmt::to_string(GetParam().storage.deflate_level) : "None",
          GetParam().storage.shuffle ? "True" : "False", GetParam().storage.fletcher32 ? "True" : "False"));
}

INSTANTIATE_TEST_SUITE_P(
    Kinds,
    Hdf5WriterStorage,
    testing::Values(
        StorageCase{"Contiguous", {}, 3},
        StorageCase{"Chunked", {.chunk = {4, 5, 6}}, 4},
        StorageCase{"ChunksThatSplitFramesAndOverhang", {.chunk = {4, 2, 4}}, 4},
        StorageCase{"Deflate", {.chunk = {4, 5, 6}, .deflate_level = 4}, 8},
        StorageCase{"ShuffleAndDeflate", {.chunk = {4, 3, 6}, .deflate_level = 1, .shuffle = true}, 4},
        StorageCase{"AppendsThatSplitChunks", {.chunk = {4, 5, 6}, .deflate_level = 2, .shuffle = true}, 3},
        StorageCase{
            "AllFilters", {.chunk = {4, 5, 6}, .deflate_level = 9, .shuffle = true, .fletcher32 = true}, 4}),
    [](const auto& kind) { return kind.param.name; });

TEST_F(Hdf5WriterFiles, AChunkThatWouldGrowIsStoredAsItIsAndMarked) {
  // Random bytes do not deflate, so the filter must be marked as skipped for a reader to get them right.
  std::vector<std::uint8_t> noise(4096);
  std::mt19937 random(7);
  for (auto& byte : noise) byte = static_cast<std::uint8_t>(random());
  auto writer = Hdf5Writer::create(path()).value();

  ASSERT_TRUE(
      writer.begin<std::uint8_t>("/d", std::array<uint64_t, 1>{4096}, {.chunk = {4096}, .deflate_level = 6}));
  ASSERT_TRUE(writer.append<std::uint8_t>("/d", 0, 4096, noise));
  ASSERT_TRUE(writer.close());

  const unsigned sum = std::accumulate(noise.begin(), noise.end(), 0U);
  EXPECT_EQ(python("i = f['d'].id.get_chunk_info(0); print(i.filter_mask, i.size, f['d'][:].sum())\n"),
            fmt::format("1 4096 {}\n", sum));
}

TEST_F(Hdf5WriterFiles, AxesAreDimensionScalesForTheReferenceLibrary) {
  auto writer = Hdf5Writer::create(path()).value();
  ASSERT_TRUE(writer.dataset<double>("/x", std::array<uint64_t, 1>{2}, std::array{0.0, 1.0}));
  ASSERT_TRUE(writer.dataset<float>("/map", std::array<uint64_t, 2>{2, 2}, std::array{1.F, 2.F, 3.F, 4.F}));
  ASSERT_TRUE(writer.dataset<float>("/rms", std::array<uint64_t, 1>{2}, std::array{1.F, 2.F}));

  ASSERT_TRUE(writer.axes("/map", std::array<std::string, 2>{"", "/x"}));
  ASSERT_TRUE(writer.axes("/rms", std::array<std::string, 1>{"/x"}));
  ASSERT_TRUE(writer.close());

  EXPECT_EQ(python("m = f['map'].dims\n"
                   "print(h5py.h5ds.is_scale(f['x'].id), len(m[0]), len(m[1]), m[1][0].name, "
                   "f['rms'].dims[0][0].name,\n"
                   "      [(f[r].name, int(i)) for r, i in f['x'].attrs['REFERENCE_LIST']])\n"),
            "True 0 1 /x /x [('/map', 1), ('/rms', 0)]\n");
  const auto dump = run("h5dump -d /map " + path().string());
  EXPECT_EQ(dump.status, 0);
  EXPECT_THAT(dump.output, testing::HasSubstr("DIMENSION_LIST"));
}

TEST_F(Hdf5WriterFiles, TheImageOfAFileInMemoryIsAFile) {
  auto writer = Hdf5Writer::in_memory().value();
  auto other = Hdf5Writer::in_memory().value();  // two at once do not meet
  ASSERT_TRUE(other.dataset<float>("/other", {}, std::array{1.0F}));
  ASSERT_TRUE(writer.dataset<double>("/values/opd_rms", {}, std::array{2.5}));

  const auto image = writer.image().value();

  std::ofstream(path(), std::ios::binary)
      .write(reinterpret_cast<const char*>(image.data()), static_cast<std::streamsize>(image.size()));
  EXPECT_EQ(python("print(list(f), f['values/opd_rms'][()])\n"), "['values'] 2.5\n");
}

TEST_F(Hdf5WriterFiles, EqualCallsGiveEqualBytes) {
  const auto write = [&](const std::string& name) {
    auto writer = Hdf5Writer::create(path(name)).value();
    const auto values = ramp(64);
    EXPECT_TRUE(
        writer.begin<float>("/opd", std::array<uint64_t, 1>{64}, {.chunk = {16}, .deflate_level = 1}));
    EXPECT_TRUE(writer.append<float>("/opd", 0, 64, values));
    EXPECT_TRUE(writer.attribute("/opd", "unit", std::string("m")));
    EXPECT_TRUE(writer.close());
  };

  write("first.h5");
  std::this_thread::sleep_for(std::chrono::milliseconds(1100));  // past the seconds that HDF5 would store
  write("second.h5");

  EXPECT_EQ(bytes_of(path("first.h5")), bytes_of(path("second.h5")));
}

TEST_F(Hdf5WriterFiles, WritersInSeveralThreadsDoNotDisturbEachOther) {
  const auto values = ramp(100 * 100);
  const auto write = [&](int number) {
    auto writer = Hdf5Writer::create(path(fmt::format("{}.h5", number))).value();
    EXPECT_TRUE(writer.begin<float>("/opd", std::array<uint64_t, 2>{100, 100},
                                    {.chunk = {5, 100}, .deflate_level = 1, .shuffle = true}));
    for (uint64_t first = 0; first < 100; first += 5) {
      EXPECT_TRUE(writer.append("/opd", first, 5, std::span(values).subspan(first * 100, 500)));
    }
    EXPECT_TRUE(writer.close());
  };

  {
    std::vector<std::jthread> threads;
    for (int number = 0; number < 4; ++number) threads.emplace_back(write, number);
  }

  const std::string alone = bytes_of(path("0.h5"));
  for (int number = 1; number < 4; ++number) EXPECT_EQ(bytes_of(path(fmt::format("{}.h5", number))), alone);
  EXPECT_EQ(python("print(abs(f['opd'][99, 99] - 9999) < 0.5)\n", "3.h5"), "True\n");
}

TEST_F(Hdf5WriterFiles, AFolderThatIsMissingOrClosedIsSaidByItsCode) {
  const auto missing = Hdf5Writer::create(path("no/such/folder.h5"));

  ASSERT_FALSE(missing);
  EXPECT_EQ(missing.error().code, ErrorCode::file_missing);
  EXPECT_THAT(missing.error().subject, testing::HasSubstr("no/such/folder.h5"));
}

/// Writes a quarter of a megabyte to `path` and says what came of it; `interrupt` comes after the file is
/// made.
std::string outcome_of_writing(
    const std::string& path, const std::function<void()>& interrupt = [] {}) {
  auto writer = Hdf5Writer::create(path);
  if (!writer) return std::string(name(writer.error().code));
  interrupt();
  const auto values = ramp(1 << 16);
  auto done = writer->begin<float>("/opd", std::array<uint64_t, 1>{1 << 16}, {});
  if (done) done = writer->append<float>("/opd", 0, 1 << 16, values);
  if (done) done = writer->close();
  return done ? "written" : std::string(name(done.error().code));
}

/// Ends the program by its usual way, the library's leave-taking included.
[[noreturn]] void leave_with(const std::string& outcome) {
  fmt::print(stderr, "{}\n", outcome);
  std::exit(0);
}

using Hdf5WriterDeathTest = Hdf5WriterFiles;

TEST_F(Hdf5WriterDeathTest, AFullDiskIsSaidByItsCode) {
  // The kernel's full device answers every write with ENOSPC, like a disk without room.
  EXPECT_EXIT(leave_with(outcome_of_writing("/dev/full")), testing::ExitedWithCode(0), "disk-full");
}

/// Puts the full device under the file that this process has open at `path`.
void fill_the_disk_under(const std::filesystem::path& path) {
  for (const auto& open : std::filesystem::directory_iterator("/proc/self/fd")) {
    std::error_code gone;  // the iterator's own descriptor
    if (std::filesystem::read_symlink(open.path(), gone) != path) continue;
    const int full = ::open("/dev/full", O_RDWR);
    ::dup2(full, std::stoi(open.path().filename()));
    ::close(full);
  }
}

TEST_F(Hdf5WriterDeathTest, ADiskThatBecomesFullLeavesNothingThatTriesAgain) {
  const auto fill = [&] { fill_the_disk_under(path()); };

  // HDF5 would report here that it closes its files in an infinite loop.
  EXPECT_EXIT(leave_with(outcome_of_writing(path().string(), fill)), testing::ExitedWithCode(0),
              "^disk-full\n$");
}

TEST_F(Hdf5WriterFiles, DataThatDoesNotFitIsAFaultOfTheCaller) {
  auto writer = Hdf5Writer::create(path()).value();
  ASSERT_TRUE(writer.begin<float>("/opd", std::array<uint64_t, 2>{4, 3}, {}));

  EXPECT_THROW((void)writer.append<float>("/opd", 0, 1, std::array{1.F, 2.F}), std::invalid_argument);
  EXPECT_THROW((void)writer.append<float>("/opd", 4, 1, std::array{1.F, 2.F, 3.F}), std::invalid_argument);
  EXPECT_THROW((void)writer.append<double>("/opd", 0, 1, std::array{1., 2., 3.}), std::invalid_argument);
  EXPECT_THROW((void)writer.append<float>("/other", 0, 1, std::array{1.F}), std::invalid_argument);
  EXPECT_THROW((void)writer.dataset<float>("/b", std::array<uint64_t, 1>{2}, std::array{1.F}),
               std::invalid_argument);
}

}  // namespace
}  // namespace bentlight::archive
