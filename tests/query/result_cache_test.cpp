#include "query/result_cache.h"

#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <atomic>
#include <fstream>
#include <thread>

#include "query/result_codec.h"
#include "support/result_samples.h"

namespace bentlight::query {
namespace {

namespace fs = std::filesystem;
using test::TemporaryFolder;

const PosixFileSystem posix;
constexpr ResultCache::Limits ample{.disk_bytes = 1 << 24, .memory_bytes = 1 << 24};
constexpr ResultCache::Limits disk_only{.disk_bytes = 1 << 24, .memory_bytes = 0};

std::string digest_of(int number) {
  return fmt::format("{:032x}", number);
}

std::shared_ptr<const Result> result_of(int number, std::size_t elements = 1) {
  Result result = test::small_result();
  result.subject = fmt::format("view-{}", number);
  result.arrays.push_back(test::array_of("a", {elements}, {"1"}, {}, std::vector<double>(elements, number)));
  return std::make_shared<const Result>(std::move(result));
}

fs::path file_of(const TemporaryFolder& folder, int number) {
  const std::string digest = digest_of(number);
  return folder.path() / "cache" / digest.substr(0, 2) / (digest + ".result");
}

ResultCache cache_in(const TemporaryFolder& folder,
                     ResultCache::Limits limits,
                     const FileSystem& files = posix) {
  return ResultCache(files, folder.path() / "cache", limits);
}

/// Files that refuse to be written, and count how often one was tried.
class FullDisk final : public FileSystem {
 public:
  Expected<std::unique_ptr<ReadFile>> open(const fs::path& path) const override { return posix.open(path); }
  Expected<FileStamp> stamp(const fs::path& path) const override { return posix.stamp(path); }
  Expected<void> replace(const fs::path& path, std::span<const std::byte>) const override {
    return failure(ErrorCode::disk_full, "writing: No space left on device", path.string());
  }
  Expected<void> create(const fs::path& path, std::span<const std::byte> bytes) const override {
    return replace(path, bytes);
  }
  Expected<std::unique_ptr<NewFile>> start(const fs::path& path) const override {
    return failure(replace(path, {}));
  }
  Expected<void> publish_folder(const fs::path&, const fs::path& to) const override {
    return replace(to, {});
  }
};

TEST(ResultCache, FindsWhatWasKept) {
  const TemporaryFolder folder;
  ResultCache cache = cache_in(folder, ample);
  const auto result = result_of(1);

  ASSERT_TRUE(cache.keep(digest_of(1), result));

  EXPECT_EQ(cache.find(digest_of(1)), result);  // the very object, not a copy
  EXPECT_EQ(cache.find(digest_of(2)), nullptr);
  const auto counts = cache.counts();
  EXPECT_EQ(counts.memory_hits, 1U);
  EXPECT_EQ(counts.misses, 1U);
  EXPECT_EQ(counts.disk_files, 1U);
  EXPECT_EQ(counts.disk_bytes, fs::file_size(file_of(folder, 1)));
}

TEST(ResultCache, OutlivesItsProcess) {
  const TemporaryFolder folder;
  ASSERT_TRUE(cache_in(folder, ample).keep(digest_of(1), result_of(1)));

  ResultCache later = cache_in(folder, ample);
  const auto found = later.find(digest_of(1));

  ASSERT_TRUE(found);
  EXPECT_EQ(encode_json(*found), encode_json(*result_of(1)));
  EXPECT_EQ(later.counts().disk_hits, 1U);
  EXPECT_EQ(later.find(digest_of(1)), found);
  EXPECT_EQ(later.counts().memory_hits, 1U);
}

TEST(ResultCache, SeesWhatAnotherProcessKept) {
  const TemporaryFolder folder;
  ResultCache reader = cache_in(folder, ample);
  ResultCache writer = cache_in(folder, ample);

  ASSERT_TRUE(writer.keep(digest_of(1), result_of(1)));

  EXPECT_TRUE(reader.find(digest_of(1)));
}

TEST(ResultCache, TakesARottenFileForAbsentAndRemovesIt) {
  const TemporaryFolder folder;
  ASSERT_TRUE(cache_in(folder, ample).keep(digest_of(1), result_of(1)));
  const auto whole = encode_result(*result_of(1));
  for (const std::size_t length : {std::size_t{0}, std::size_t{10}, whole.size() - 1}) {
    std::ofstream(file_of(folder, 1), std::ios::binary)
        .write(reinterpret_cast<const char*>(whole.data()), static_cast<std::streamsize>(length));
    ResultCache cache = cache_in(folder, ample);

    EXPECT_EQ(cache.find(digest_of(1)), nullptr);

    EXPECT_FALSE(fs::exists(file_of(folder, 1)));
    EXPECT_EQ(cache.counts().damaged, 1U);
    EXPECT_EQ(cache.counts().disk_bytes, 0U);
    ASSERT_TRUE(cache.keep(digest_of(1), result_of(1)));
    EXPECT_TRUE(cache.find(digest_of(1)));
  }
}

TEST(ResultCache, OnAFullDiskKeepsInMemoryAndCounts) {
  const TemporaryFolder folder;
  const FullDisk full;
  ResultCache cache = cache_in(folder, ample, full);
  const auto result = result_of(1);

  const auto kept = cache.keep(digest_of(1), result);

  ASSERT_FALSE(kept);
  EXPECT_EQ(kept.error().code, ErrorCode::disk_full);
  EXPECT_EQ(cache.find(digest_of(1)), result);
  EXPECT_EQ(cache.counts().failures, 1U);
  EXPECT_EQ(cache.counts().disk_files, 0U);
  EXPECT_FALSE(cache.keep(digest_of(1), result));  // tried again, not stuck in being written
}

TEST(ResultCache, DropsFromDiskWhatWasUsedLongestAgo) {
  const TemporaryFolder folder;
  const std::size_t bytes = encode_result(*result_of(1, 1000)).size();
  ResultCache cache = cache_in(folder, {.disk_bytes = 3 * bytes + bytes / 2, .memory_bytes = 0});
  for (int i = 1; i <= 3; ++i) ASSERT_TRUE(cache.keep(digest_of(i), result_of(i, 1000)));
  ASSERT_TRUE(cache.find(digest_of(1)));

  ASSERT_TRUE(cache.keep(digest_of(4), result_of(4, 1000)));

  EXPECT_FALSE(fs::exists(file_of(folder, 2)));
  for (const int kept : {1, 3, 4}) EXPECT_TRUE(fs::exists(file_of(folder, kept))) << kept;
  EXPECT_EQ(cache.counts().disk_evictions, 1U);
  EXPECT_EQ(cache.counts().disk_bytes, 3 * bytes);
  EXPECT_EQ(cache.find(digest_of(2)), nullptr);
}

TEST(ResultCache, RemembersOverAStartWhatWasUsedLast) {
  const TemporaryFolder folder;
  const std::size_t bytes = encode_result(*result_of(1, 1000)).size();
  {
    ResultCache cache = cache_in(folder, disk_only);
    for (int i = 1; i <= 3; ++i) ASSERT_TRUE(cache.keep(digest_of(i), result_of(i, 1000)));
    // Times of files are as coarse as the kernel's tick, so the order is set apart by hand.
    for (int i = 1; i <= 3; ++i) {
      fs::last_write_time(file_of(folder, i), fs::file_time_type::clock::now() - std::chrono::hours(10 - i));
    }
    ASSERT_TRUE(cache.find(digest_of(1)));
  }

  const ResultCache smaller = cache_in(folder, {.disk_bytes = 2 * bytes, .memory_bytes = 0});

  EXPECT_FALSE(fs::exists(file_of(folder, 2)));
  EXPECT_TRUE(fs::exists(file_of(folder, 1)));
  EXPECT_TRUE(fs::exists(file_of(folder, 3)));
  EXPECT_EQ(smaller.counts().disk_files, 2U);
}

TEST(ResultCache, DropsFromMemoryWhatWasUsedLongestAgo) {
  const TemporaryFolder folder;
  const std::size_t bytes = result_of(1, 1000)->memory_bytes();
  ResultCache cache = cache_in(folder, {.disk_bytes = 0, .memory_bytes = 5 * bytes});
  for (int i = 1; i <= 4; ++i) ASSERT_TRUE(cache.keep(digest_of(i), result_of(i, 1000)));
  ASSERT_TRUE(cache.find(digest_of(1)));

  ASSERT_TRUE(cache.keep(digest_of(5), result_of(5, 1000)));

  EXPECT_EQ(cache.find(digest_of(2)), nullptr);
  for (const int kept : {1, 3, 4, 5}) EXPECT_TRUE(cache.find(digest_of(kept))) << kept;
  EXPECT_EQ(cache.counts().memory_evictions, 1U);
  EXPECT_LE(cache.counts().memory_bytes, 5 * bytes);
}

TEST(ResultCache, OneLargeResultDoesNotDriveOutTheOthers) {
  const TemporaryFolder folder;
  ResultCache cache = cache_in(folder, {.disk_bytes = 1 << 24, .memory_bytes = 100'000});
  ASSERT_TRUE(cache.keep(digest_of(1), result_of(1)));

  ASSERT_TRUE(cache.keep(digest_of(2), result_of(2, 10'000)));

  ASSERT_TRUE(cache.find(digest_of(1)));
  ASSERT_TRUE(cache.find(digest_of(2)));
  EXPECT_EQ(cache.counts().memory_hits, 1U);
  EXPECT_EQ(cache.counts().disk_hits, 1U);
}

TEST(ResultCache, KeepsRepliesByEncodingAndArray) {
  const TemporaryFolder folder;
  ResultCache cache = cache_in(folder, ample);
  const auto json = std::make_shared<const Encoded>(encode(*result_of(1), Encoding::json).value());
  const auto npy =
      std::make_shared<const Encoded>(encode(*result_of(1), Encoding::npy, {.array = "mean"}).value());

  cache.keep_encoded(digest_of(1), Encoding::json, "", json);
  cache.keep_encoded(digest_of(1), Encoding::npy, "mean", npy);

  EXPECT_EQ(cache.encoded(digest_of(1), Encoding::json, ""), json);
  EXPECT_EQ(cache.encoded(digest_of(1), Encoding::npy, "mean"), npy);
  EXPECT_EQ(cache.encoded(digest_of(1), Encoding::npy, "time"), nullptr);
  EXPECT_EQ(cache.encoded(digest_of(2), Encoding::json, ""), nullptr);
  EXPECT_EQ(cache.counts().encoded_hits, 2U);
  EXPECT_EQ(cache.counts().encoded_misses, 2U);
}

TEST(ResultCache, InMemoryOnlyLeavesTheDiskAlone) {
  const TemporaryFolder folder;
  ResultCache cache = cache_in(folder, ample);

  cache.keep_in_memory(digest_of(1), result_of(1));

  EXPECT_TRUE(cache.find(digest_of(1)));
  EXPECT_FALSE(fs::exists(file_of(folder, 1)));
}

TEST(ResultCache, WithoutADiskLimitNeitherWritesNorCleans) {
  const TemporaryFolder folder;
  ASSERT_TRUE(cache_in(folder, ample).keep(digest_of(1), result_of(1)));

  ResultCache cache = cache_in(folder, {.disk_bytes = 0, .memory_bytes = 1 << 20});
  ASSERT_TRUE(cache.keep(digest_of(2), result_of(2)));

  EXPECT_TRUE(fs::exists(file_of(folder, 1)));
  EXPECT_FALSE(fs::exists(file_of(folder, 2)));
}

TEST(ResultCache, NamesThatAreNoDigestsNeverReachThePath) {
  const TemporaryFolder folder;
  ResultCache cache = cache_in(folder, disk_only);
  std::ofstream(folder.path() / "secret.result") << "x";

  for (const std::string& name :
       {std::string(), std::string("../secret"), std::string("ab"), std::string("/etc/passwd"),
        std::string(200, 'a'), std::string("ABCDEF"), digest_of(1) + "/json/"}) {
    EXPECT_TRUE(cache.keep(name, result_of(1))) << name;
    EXPECT_EQ(cache.find(name), nullptr) << name;
  }
  EXPECT_TRUE(fs::exists(folder.path() / "secret.result"));
  EXPECT_FALSE(fs::exists(folder.path() / "cache"));
}

TEST(ResultCache, StartsAmongForeignFilesAndClearsWhatACrashLeft) {
  const TemporaryFolder folder;
  ASSERT_TRUE(cache_in(folder, ample).keep(digest_of(1), result_of(1)));
  const auto shelf = file_of(folder, 1).parent_path();
  std::ofstream(shelf / "notes.txt") << "mine";
  std::ofstream(shelf / "old.result.77.aside") << "torn";
  std::ofstream(shelf / "new.result.78.aside") << "being written";
  fs::last_write_time(shelf / "old.result.77.aside",
                      fs::file_time_type::clock::now() - std::chrono::hours(2));
  fs::create_directories(shelf / (digest_of(5) + ".result"));

  ResultCache cache = cache_in(folder, ample);

  EXPECT_EQ(cache.counts().disk_files, 1U);
  EXPECT_TRUE(fs::exists(shelf / "notes.txt"));
  EXPECT_FALSE(fs::exists(shelf / "old.result.77.aside"));
  EXPECT_TRUE(fs::exists(shelf / "new.result.78.aside"));
  EXPECT_EQ(cache.find(digest_of(5)), nullptr);  // a folder is no result
  EXPECT_TRUE(cache.find(digest_of(1)));
}

TEST(ResultCache, ServesManyThreads) {
  const TemporaryFolder folder;
  const std::size_t bytes = encode_result(*result_of(1, 100)).size();
  ResultCache cache =
      cache_in(folder, {.disk_bytes = 6 * bytes, .memory_bytes = 4 * result_of(1, 100)->memory_bytes()});
  std::atomic<int> wrong{0}, found{0};

  std::vector<std::thread> threads;
  for (int lane = 0; lane < 4; ++lane) {
    threads.emplace_back([&, lane] {
      for (int i = 0; i < 100; ++i) {
        const int number = 1 + (i * 7 + lane) % 9;
        if (const auto result = cache.find(digest_of(number))) {
          ++found;
          if (result->subject != fmt::format("view-{}", number)) ++wrong;
        } else if (!cache.keep(digest_of(number), result_of(number, 100))) {
          ++wrong;
        }
      }
    });
  }
  for (std::thread& thread : threads) thread.join();

  EXPECT_EQ(wrong, 0);
  EXPECT_GT(found, 0);
  EXPECT_EQ(cache.counts().damaged, 0U);
  EXPECT_LE(cache.counts().disk_bytes, 6 * bytes);
}

}  // namespace
}  // namespace bentlight::query
