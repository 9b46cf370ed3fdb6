#include "query/result_cache.h"

#include <algorithm>
#include <chrono>
#include <optional>
#include <utility>
#include <vector>

#include "base/limits.h"
#include "query/result_codec.h"

namespace bentlight::query {

namespace {

namespace fs = std::filesystem;

constexpr std::string_view suffix = ".result";

// One reply may take this share of the memory, so that a long series does not drive out a hundred small ones.
constexpr std::size_t largest_share = 4;

// A file aside that is older than any write takes was left by a process that died.
constexpr std::chrono::hours aside_age{1};

bool is_digest(std::string_view text) {
  const bool is_long_enough = text.size() > 2 && text.size() <= 128;
  return is_long_enough &&
         std::ranges::all_of(text, [](char c) { return (c >= '0' && c <= '9') || (c >= 'a' && c <= 'f'); });
}

std::string key_of(const std::string& digest, Encoding encoding, std::string_view array) {
  std::string key = digest;
  key += '/';
  key += name(encoding);
  key += '/';
  key += array;
  return key;
}

/// A file of the folder, as found at the start.
struct Found {
  std::string digest;
  std::uint64_t bytes = 0;
  fs::file_time_type used;
};

/// The cached result that lies at `path`; nothing for a folder, a file aside, or anything else.
std::optional<Found> cached_result(const fs::directory_entry& entry) {
  std::error_code failed;
  const std::string file = entry.path().filename().string();
  if (!file.ends_with(suffix) || !entry.is_regular_file(failed)) return std::nullopt;
  Found found{
      .digest = file.substr(0, file.size() - suffix.size()), .bytes = entry.file_size(failed), .used = {}};
  if (failed || !is_digest(found.digest)) return std::nullopt;
  found.used = entry.last_write_time(failed);
  return failed ? std::nullopt : std::optional(std::move(found));
}

void remove_if_left_behind(const fs::directory_entry& entry) {
  std::error_code failed;
  if (entry.path().extension() != ".aside" || !entry.is_regular_file(failed)) return;
  const auto written = entry.last_write_time(failed);
  if (!failed && fs::file_time_type::clock::now() - written > aside_age) fs::remove(entry.path(), failed);
}

/// The results in `folder`, those used longest ago first. What cannot be looked at is as if it were not
/// there.
std::vector<Found> results_in(const fs::path& folder) {
  std::vector<Found> results;
  std::error_code failed;
  fs::recursive_directory_iterator place(folder, fs::directory_options::skip_permission_denied, failed);
  for (; !failed && place != fs::recursive_directory_iterator(); place.increment(failed)) {
    if (auto found = cached_result(*place)) results.push_back(std::move(*found));
    remove_if_left_behind(*place);
  }
  std::ranges::sort(results, {}, [](const Found& found) { return std::pair(found.used, found.digest); });
  return results;
}

}  // namespace

ResultCache::ResultCache(const FileSystem& files, fs::path folder, Limits limits)
    : files_(files), folder_(std::move(folder)), memory_(limits.memory_bytes), disk_(limits.disk_bytes) {
  take_stock();
}

void ResultCache::take_stock() {
  if (disk_.limit_bytes() == 0) return;
  for (const Found& found : results_in(folder_)) note_file(found.digest, found.bytes);
}

fs::path ResultCache::place_of(const std::string& digest) const {
  return folder_ / digest.substr(0, 2) / (digest + std::string(suffix));
}

std::shared_ptr<const Result> ResultCache::find(const std::string& digest) {
  if (!is_digest(digest)) return nullptr;
  {
    const std::lock_guard lock(mutex_);
    if (const Held* held = memory_.use(digest)) {
      ++counts_.memory_hits;
      disk_.use(digest);
      return std::get<std::shared_ptr<const Result>>(*held);
    }
  }
  auto result = disk_.limit_bytes() > 0 ? read(digest) : nullptr;
  if (result) {
    hold(digest, result, result->memory_bytes());
    // The time of last use outlives the process only as the file's own; if it cannot be set, that is all.
    std::error_code ignored;
    fs::last_write_time(place_of(digest), fs::file_time_type::clock::now(), ignored);
  }
  const std::lock_guard lock(mutex_);
  ++(result ? counts_.disk_hits : counts_.misses);
  return result;
}

/// The result on disk. What is there and is no result is removed, so that it is computed and written anew.
std::shared_ptr<const Result> ResultCache::read(const std::string& digest) {
  const auto bytes = read_whole(files_, place_of(digest), limits::result_bytes + limits::mebi);
  if (!bytes) {
    const std::lock_guard lock(mutex_);
    disk_.remove(digest);
    if (bytes.error().code != ErrorCode::file_missing) ++counts_.failures;
    return nullptr;
  }
  auto result = decode_result(as_bytes(*bytes));
  if (!result) {
    remove_file(digest);
    const std::lock_guard lock(mutex_);
    disk_.remove(digest);
    ++counts_.damaged;
    return nullptr;
  }
  note_file(digest, bytes->size());
  return std::make_shared<const Result>(std::move(*result));
}

Expected<void> ResultCache::keep(const std::string& digest, std::shared_ptr<const Result> result) {
  keep_in_memory(digest, result);
  if (!is_digest(digest) || disk_.limit_bytes() == 0) return {};
  const auto bytes = encode_result(*result);
  if (bytes.size() > disk_.limit_bytes()) return {};
  {
    // Equal digests are equal results, so of two writers one is enough.
    const std::lock_guard lock(mutex_);
    if (!being_written_.insert(digest).second) return {};
  }
  auto written = write(digest, bytes);
  const std::lock_guard lock(mutex_);
  being_written_.erase(digest);
  if (!written) ++counts_.failures;
  return written;
}

Expected<void> ResultCache::write(const std::string& digest, std::span<const std::byte> bytes) {
  const auto place = place_of(digest);
  std::error_code ignored;  // replace() reports what matters: whether the file could be written
  fs::create_directories(place.parent_path(), ignored);
  if (auto done = files_.replace(place, bytes); !done) return done;
  note_file(digest, bytes.size());
  return {};
}

/// Counts a file as there and just used, and removes what is over the limit for it.
void ResultCache::note_file(const std::string& digest, std::uint64_t bytes) {
  std::vector<RecentlyUsed<OnDisk>::Entry> gone;
  {
    const std::lock_guard lock(mutex_);
    gone = disk_.put(digest, {}, bytes);
    counts_.disk_evictions += gone.size();
  }
  for (const auto& entry : gone) remove_file(entry.key);
}

void ResultCache::remove_file(const std::string& digest) const {
  std::error_code ignored;  // a file that stays is found again at the next start
  fs::remove(place_of(digest), ignored);
}

void ResultCache::keep_in_memory(const std::string& digest, std::shared_ptr<const Result> result) {
  const std::size_t bytes = result->memory_bytes();
  hold(digest, std::move(result), bytes);
}

std::shared_ptr<const Encoded> ResultCache::encoded(const std::string& digest,
                                                    Encoding encoding,
                                                    std::string_view array) {
  const std::string key = key_of(digest, encoding, array);
  const std::lock_guard lock(mutex_);
  disk_.use(digest);  // its bytes are in use, wherever they come from
  const Held* held = memory_.use(key);
  ++(held != nullptr ? counts_.encoded_hits : counts_.encoded_misses);
  return held != nullptr ? std::get<std::shared_ptr<const Encoded>>(*held) : nullptr;
}

void ResultCache::keep_encoded(const std::string& digest,
                               Encoding encoding,
                               std::string_view array,
                               std::shared_ptr<const Encoded> encoded) {
  const std::size_t bytes = sizeof(Encoded) + encoded->content_type.size() + encoded->bytes->size();
  hold(key_of(digest, encoding, array), std::move(encoded), bytes);
}

void ResultCache::hold(const std::string& key, Held held, std::size_t bytes) {
  bytes += 3 * key.size() + 128;  // what the list and the map take
  if (bytes > memory_.limit_bytes() / largest_share) return;
  std::vector<RecentlyUsed<Held>::Entry> gone;  // freed after the lock
  const std::lock_guard lock(mutex_);
  gone = memory_.put(key, std::move(held), bytes);
  counts_.memory_evictions += gone.size();
}

ResultCache::Counts ResultCache::counts() const {
  const std::lock_guard lock(mutex_);
  Counts counts = counts_;
  counts.memory_bytes = memory_.bytes();
  counts.disk_bytes = disk_.bytes();
  counts.memory_items = memory_.count();
  counts.disk_files = disk_.count();
  return counts;
}

}  // namespace bentlight::query
