// Filling the index: walks the archive, asks the probe, reads each frame, keeps summaries.
#pragma once

#include <atomic>
#include <chrono>
#include <filesystem>
#include <functional>
#include <mutex>
#include <optional>
#include <stop_token>
#include <string>
#include <vector>

#include "archive/probe_client.h"
#include "base/error.h"
#include "base/file.h"
#include "base/log.h"
#include "base/work_pool.h"
#include "index/index.h"
#include "ingest/walk.h"

namespace bentlight::ingest {

struct IndexProgress {
  bool is_running = false;
  std::size_t files_done = 0, files_total = 0;
  std::uint64_t bytes_done = 0, bytes_total = 0;  // of files that have to be read
  double bytes_per_second = 0.0;
  std::string current;  // path of the file being read
  std::size_t indexed = 0, unchanged = 0, refused = 0, missing = 0;
  std::optional<Error> error;  // why indexing stopped early
};

struct IndexerParts {
  const FileSystem& files;
  const archive::ProbeClient& probe;
  index::Index& index;
  WorkPool& pool;
  Log& log;
};

/// threads  run() from one thread at a time; progress() from any
class Indexer {
 public:
  Indexer(IndexerParts parts, std::filesystem::path archive, std::filesystem::path state);

  /// Brings the index up to date with the archive. A file whose stamp is unchanged costs a stat; one that
  /// cannot be read becomes a refusal with its reason, and the rest goes on. A file that is gone keeps its
  /// summary: back as it was, it is not read again.
  ///
  ///   errors  cancelled; disk_full, io_error and the like of the state folder, after which what was indexed
  ///   stands
  Expected<IndexProgress> run(const std::stop_token& stop);

  IndexProgress progress() const;

 private:
  Expected<std::vector<FoundFile>> changed_files(const Walk& walk);
  bool is_kept(const index::KnownFile& file) const;
  bool ends_the_walk(const Error& error) const;
  Expected<void> index_all(const Walk& walk, const std::stop_token& stop);
  Expected<void> index_one(const FoundFile& file, const std::stop_token& stop);
  Expected<index::ViewRecord> read_view(const FoundFile& file, const std::stop_token& stop);
  Expected<void> refuse(const std::string& path, const FileStamp& stamp, const Error& error);
  Expected<void> mark_vanished(const Walk& walk);
  void clean_up() const;
  double rate(std::uint64_t bytes) const;
  void note(const std::function<void(IndexProgress&)>& change);

  IndexerParts parts_;
  const std::filesystem::path archive_, state_;
  std::atomic<std::uint64_t> bytes_of_current_{0};  // done with, of the file being read
  std::atomic<std::uint64_t> folders_made_{0};

  mutable std::mutex mutex_;  // guards the members below
  IndexProgress progress_;
  std::chrono::steady_clock::time_point started_;
};

}  // namespace bentlight::ingest
