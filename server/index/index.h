// The index: which views exist, under which conditions, what was refused. One SQLite database in the state
// folder.
#pragma once

#include <cstdint>
#include <filesystem>
#include <functional>
#include <map>
#include <memory>
#include <mutex>
#include <optional>
#include <string>
#include <vector>

#include "base/error.h"
#include "base/file.h"

namespace bentlight::index {

class Connection;
class Query;

/// One view as it is indexed. What the file does not say stays empty.
struct ViewRecord {
  std::string id;    // given by upsert_view
  std::string path;  // relative to the archive
  std::string dataset;
  std::string campaign, campaign_name, run, run_name, source, note;
  std::optional<double> azimuth_deg, elevation_deg, aperture_diameter_m, reference_length_m;
  std::optional<double> mach, velocity_m_s, density_kg_m3, temperature_k, wavelength_m, gladstone_dale_m3_kg;
  std::uint64_t frames = 0, rows = 0, columns = 0, points = 0, finite_frames = 0;
  double frame_rate_hz = 0.0, duration_s = 0.0, start_s = 0.0;
  FileStamp stamp;
  std::string metadata_digest;
  std::string folder;  // below STATE/views
  std::string state = "ready";
  std::int64_t indexed_at_ms = 0;
  std::string checks = "[]";  // JSON
  std::optional<double> opd_rms_mean_m, opd_rms_overall_m;
};

struct CampaignRecord {
  std::string id, name;
  std::uint64_t runs = 0, views = 0;
};

/// One run; a condition stands here when all its views agree on it.
struct RunRecord {
  std::string id, name, campaign, campaign_name, source;
  std::uint64_t views = 0;
  std::optional<double> azimuth_low_deg, azimuth_high_deg, elevation_low_deg, elevation_high_deg;
  std::optional<double> mach, velocity_m_s, density_kg_m3, temperature_k, reference_length_m;
};

struct RefusalRecord {
  std::string path, code, text;
  std::int64_t refused_at_ms = 0;
  FileStamp stamp;
};

struct IndexCounts {
  std::uint64_t campaigns = 0, runs = 0, views = 0, missing = 0, refusals = 0, frames = 0, bytes = 0,
                revision = 0;
};

/// A file that the index knows, for telling what is new.
struct KnownFile {
  std::string path;
  FileStamp stamp;
  std::string state;   // ready, missing, refused
  std::string folder;  // below STATE/views; empty when refused
};

struct ColumnRange {
  std::optional<double> low, high;
};

struct ViewFilter {
  std::optional<std::string> campaign, run, source, state;
  std::map<std::string, ColumnRange> ranges;  // by column, of a fixed set
  std::string sort = "id";                    // of a fixed set
  bool descending = false;
  std::size_t limit = 100, offset = 0;
};

struct RunFilter {
  std::optional<std::string> campaign, source;
};

template <class Item>
struct Page {
  std::vector<Item> items;
  bool more = false;
};

/// The state folder: index.sqlite, lock, views/, staging/, cache/.
///
///   threads  safe from any thread: readers have connections of their own, writers take turns
class Index {
 public:
  /// Makes the folder when it is not there, migrates an older index, and keeps other writers out until it is
  /// closed.
  ///
  ///   errors  state_locked naming the process that has it, newer_state, damaged_state, permission_denied,
  ///   disk_full
  static Expected<std::unique_ptr<Index>> open_for_writing(const std::filesystem::path& state);

  /// errors  not_indexed when there is no index; newer_state, damaged_state
  static Expected<std::unique_ptr<Index>> open_for_reading(const std::filesystem::path& state);
  ~Index();

  /// Whether the process that wrote last was killed or lost its power.
  bool was_left_uncleanly() const;

  // Each of the following is one transaction; the revision rises if it changed anything.

  /// Keeps a view. Its id stays with its path and dataset; a new one is made of run and angles. A refusal of
  /// the same path is forgotten. Gives the record as kept.
  Expected<ViewRecord> upsert_view(ViewRecord record);
  /// The file is gone: its views keep their summaries, a refusal of it is forgotten.
  Expected<void> mark_missing(const std::string& path);
  /// The file is back as it was.
  Expected<void> mark_present(const std::string& path);
  /// The view's summary turned out damaged: its file is read at the next indexing, changed or not.
  Expected<void> read_again(const std::string& id);
  /// Says why a file is not indexed. Views of its path were of another state of the file and become missing.
  Expected<void> put_refusal(const RefusalRecord& refusal);

  /// errors  unknown_view
  Expected<ViewRecord> view(const std::string& id) const;
  /// errors  bad_parameter for a column that is none
  Expected<Page<ViewRecord>> views(const ViewFilter& filter) const;
  /// Views whose file is there, by azimuth, elevation, id.
  Expected<std::vector<ViewRecord>> views_of_run(const std::string& run) const;
  /// errors  unknown_run
  Expected<RunRecord> run(const std::string& id) const;
  Expected<Page<RunRecord>> runs(const RunFilter& filter, std::size_t limit, std::size_t offset) const;
  Expected<Page<CampaignRecord>> campaigns(std::size_t limit, std::size_t offset) const;
  Expected<Page<RefusalRecord>> refusals(std::size_t limit, std::size_t offset) const;
  Expected<IndexCounts> counts() const;
  Expected<std::vector<KnownFile>> known_files() const;
  Expected<std::vector<std::string>> folders() const;

 private:
  class Lock;
  explicit Index(std::filesystem::path state);

  template <class Value>
  Expected<Value> reading(const std::function<Expected<Value>(Connection&)>& ask) const;
  Expected<void> writing(const std::function<Expected<void>(Connection&)>& change);

  const std::filesystem::path state_;
  std::unique_ptr<Lock> lock_;

  mutable std::mutex readers_mutex_;  // guards the idle reading connections
  mutable std::vector<std::unique_ptr<Connection>> idle_readers_;

  std::mutex writer_mutex_;  // guards the writing connection
  std::unique_ptr<Connection> writer_;
};

}  // namespace bentlight::index
