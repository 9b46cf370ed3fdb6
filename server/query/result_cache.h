// Results that were computed lately: on disk within a bound, so that they outlive the process, and the latest
// of them in memory, as they are and as bytes of replies.
#pragma once

#include <cstddef>
#include <cstdint>
#include <filesystem>
#include <memory>
#include <mutex>
#include <span>
#include <string>
#include <string_view>
#include <unordered_set>
#include <variant>

#include "base/error.h"
#include "base/file.h"
#include "query/encode/encoding.h"
#include "query/recently_used.h"
#include "query/result.h"

namespace bentlight::query {

/// Files lie at FOLDER/<first two digits>/<digest>.result, in the form of query/result_codec.h. Nothing in
/// the folder is trusted: a torn, rotten or foreign file counts as absent and is removed. Several processes
/// may share the folder; each keeps what it knows of within the limit.
///
///   needs    digests of 3 to 128 lower-case hexadecimal digits; others are never found and never kept
///   threads  safe from any thread; files are read and written outside the lock
///   cost     a reply found in memory costs a microsecond; keep() writes and syncs one file
class ResultCache {
 public:
  struct Limits {
    std::uint64_t disk_bytes = 0;  // 0: the folder is left alone
    std::size_t memory_bytes = 0;
  };

  /// Looks through `folder` once, and removes what is over the limit, oldest first. The folder need not
  /// exist.
  ResultCache(const FileSystem& files, std::filesystem::path folder, Limits limits);

  /// The result, or null.
  std::shared_ptr<const Result> find(const std::string& digest);

  /// Keeps a result in memory and on disk. A failure costs speed next time and nothing else: the result is in
  /// memory then, and the failure counted.
  ///
  ///   errors  disk_full, permission_denied, io_error
  Expected<void> keep(const std::string& digest, std::shared_ptr<const Result> result);

  /// Keeps a result in memory only: for what is cheaper to compute again than to sync to a disk.
  void keep_in_memory(const std::string& digest, std::shared_ptr<const Result> result);

  /// A reply's bytes, or null. `array` as in EncodeOptions.
  std::shared_ptr<const Encoded> encoded(const std::string& digest,
                                         Encoding encoding,
                                         std::string_view array);
  void keep_encoded(const std::string& digest,
                    Encoding encoding,
                    std::string_view array,
                    std::shared_ptr<const Encoded> encoded);

  /// Since the start, and as it is now.
  struct Counts {
    std::uint64_t memory_hits = 0, disk_hits = 0, misses = 0;  // of find()
    std::uint64_t encoded_hits = 0, encoded_misses = 0;
    std::uint64_t memory_evictions = 0, disk_evictions = 0;
    std::uint64_t failures = 0;  // files that could not be written or read
    std::uint64_t damaged = 0;   // files that were not what they should be
    std::uint64_t memory_bytes = 0, disk_bytes = 0;
    std::size_t memory_items = 0, disk_files = 0;
  };
  Counts counts() const;

 private:
  using Held = std::variant<std::shared_ptr<const Result>, std::shared_ptr<const Encoded>>;
  struct OnDisk {};

  std::filesystem::path place_of(const std::string& digest) const;
  void take_stock();
  std::shared_ptr<const Result> read(const std::string& digest);
  Expected<void> write(const std::string& digest, std::span<const std::byte> bytes);
  void note_file(const std::string& digest, std::uint64_t bytes);
  void remove_file(const std::string& digest) const;
  void hold(const std::string& key, Held held, std::size_t bytes);

  const FileSystem& files_;
  const std::filesystem::path folder_;

  mutable std::mutex mutex_;  // guards the members below
  RecentlyUsed<Held> memory_;
  RecentlyUsed<OnDisk> disk_;
  std::unordered_set<std::string> being_written_;
  Counts counts_;
};

}  // namespace bentlight::query
