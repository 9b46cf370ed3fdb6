#include "index/index.h"

#include <fcntl.h>
#include <fmt/format.h>
#include <sys/file.h>
#include <unistd.h>

#include <algorithm>
#include <array>
#include <cerrno>
#include <cmath>

#include "base/text.h"
#include "index/database.h"

namespace bentlight::index {

namespace fs = std::filesystem;

namespace {

constexpr std::string_view view_columns = R"(
id, path, dataset, campaign, campaign_name, run, run_name, source, note,
azimuth_deg, elevation_deg, aperture_diameter_m, reference_length_m, mach,
velocity_m_s, density_kg_m3, temperature_k, wavelength_m, gladstone_dale_m3_kg,
frames, rows, columns, points, finite_frames, frame_rate_hz, duration_s, start_s,
size_bytes, mtime_ns, inode, metadata_digest, folder, state, indexed_at_ms, checks,
opd_rms_mean_m, opd_rms_overall_m)";
constexpr int view_column_count = 37;

constexpr std::array range_columns = {
    "azimuth_deg",   "elevation_deg",  "mach", "velocity_m_s", "frames",    "aperture_diameter_m",
    "frame_rate_hz", "opd_rms_mean_m", "rows", "columns",      "duration_s"};
constexpr std::array sort_columns = {"id",     "azimuth_deg",   "elevation_deg", "mach",
                                     "frames", "frame_rate_hz", "opd_rms_mean_m"};

ViewRecord view_of(const Query& row) {
  int c = 0;
  ViewRecord view;
  for (auto* text : {&view.id, &view.path, &view.dataset, &view.campaign, &view.campaign_name, &view.run,
                     &view.run_name, &view.source, &view.note}) {
    *text = row.text(c++);
  }
  for (auto* number : {&view.azimuth_deg, &view.elevation_deg, &view.aperture_diameter_m,
                       &view.reference_length_m, &view.mach, &view.velocity_m_s, &view.density_kg_m3,
                       &view.temperature_k, &view.wavelength_m, &view.gladstone_dale_m3_kg}) {
    *number = row.real_or_none(c++);
  }
  for (auto* size : {&view.frames, &view.rows, &view.columns, &view.points, &view.finite_frames})
    *size = row.size(c++);
  for (auto* number : {&view.frame_rate_hz, &view.duration_s, &view.start_s}) *number = row.real(c++);
  view.stamp.size_bytes = row.size(c++);
  view.stamp.mtime_ns = row.whole(c++);
  view.stamp.inode = row.size(c++);
  for (auto* text : {&view.metadata_digest, &view.folder, &view.state}) *text = row.text(c++);
  view.indexed_at_ms = row.whole(c++);
  view.checks = row.text(c++);
  view.opd_rms_mean_m = row.real_or_none(c++);
  view.opd_rms_overall_m = row.real_or_none(c++);
  return view;
}

void bind_view(Query& query, const ViewRecord& view) {
  for (const auto* text : {&view.id, &view.path, &view.dataset, &view.campaign, &view.campaign_name,
                           &view.run, &view.run_name, &view.source, &view.note}) {
    query.bind(std::string_view(*text));
  }
  for (const auto& number : {view.azimuth_deg, view.elevation_deg, view.aperture_diameter_m,
                             view.reference_length_m, view.mach, view.velocity_m_s, view.density_kg_m3,
                             view.temperature_k, view.wavelength_m, view.gladstone_dale_m3_kg}) {
    query.bind(number);
  }
  for (const auto size : {view.frames, view.rows, view.columns, view.points, view.finite_frames})
    query.bind(size);
  for (const auto number : {view.frame_rate_hz, view.duration_s, view.start_s}) query.bind(number);
  query.bind(view.stamp.size_bytes).bind(view.stamp.mtime_ns).bind(view.stamp.inode);
  for (const auto* text : {&view.metadata_digest, &view.folder, &view.state})
    query.bind(std::string_view(*text));
  query.bind(view.indexed_at_ms).bind(std::string_view(view.checks));
  query.bind(view.opd_rms_mean_m).bind(view.opd_rms_overall_m);
}

/// One row of one statement, or nothing.
template <class Value, class Take>
Expected<std::optional<Value>> one(Connection& connection,
                                   const std::string& sql,
                                   const std::vector<std::string>& texts,
                                   Take take) {
  auto query = connection.query(sql);
  if (!query) return failure(query);
  for (const auto& text : texts) query->bind(std::string_view(text));
  const auto row = query->step();
  if (!row) return failure(row);
  if (!*row) return std::optional<Value>();
  return std::optional<Value>(take(*query));
}

template <class Value, class Take>
Expected<std::vector<Value>> all(Query& query, Take take) {
  std::vector<Value> rows;
  while (true) {
    const auto row = query.step();
    if (!row) return failure(row);
    if (!*row) return rows;
    rows.push_back(take(query));
  }
}

/// A page out of a query that was asked for one row more than a page holds.
template <class Value, class Take>
Expected<Page<Value>> page(Query& query, std::size_t limit, Take take) {
  auto rows = all<Value>(query, take);
  if (!rows) return failure(rows);
  Page<Value> found{.more = rows->size() > limit};
  if (found.more) rows->resize(limit);
  found.items = std::move(*rows);
  return found;
}

/// 60 as "060", 97.5 as "097.5", -5 as "m05": angles as parts of an id.
std::string angle_text(double degrees, int digits) {
  const double rounded = std::round(std::abs(degrees) * 100) / 100;
  const double whole = std::floor(rounded);
  std::string text = fmt::format("{:0{}.0f}", whole, digits);
  if (rounded > whole) text += shortest(std::round((rounded - whole) * 100) / 100).substr(1);
  return (degrees < 0 && rounded > 0 ? "m" : "") + text;
}

std::string wanted_view_id(const ViewRecord& view) {
  if (view.azimuth_deg && view.elevation_deg) {
    return fmt::format("{}-az{}-el{}", view.run, angle_text(*view.azimuth_deg, 3),
                       angle_text(*view.elevation_deg, 2));
  }
  const std::string stem = slug(fs::path(view.path).stem().string());
  return view.run + "-" + (stem.empty() ? "view" : stem);
}

Expected<bool> exists(Connection& connection, const std::string& sql, const std::vector<std::string>& texts) {
  const auto found = one<int>(connection, sql, texts, [](const Query&) { return 1; });
  if (!found) return failure(found);
  return found->has_value();
}

/// The first of `wanted`, `otherwise`, otherwise-2, otherwise-3 … that `is_used` does not hold for.
Expected<std::string> free_id(const std::string& wanted,
                              const std::string& otherwise,
                              const std::function<Expected<bool>(const std::string&)>& is_used) {
  std::string id = wanted;
  for (int number = wanted == otherwise ? 2 : 1;; ++number) {
    const auto used = is_used(id);
    if (!used) return failure(used);
    if (!*used) return id;
    id = number == 1 ? otherwise : fmt::format("{}-{}", otherwise, number);
  }
}

/// A name made fit for an address; a name without any fit letter becomes "unnamed", and the number after it
/// tells it from others.
std::string id_of_name(std::string_view name) {
  std::string made = slug(name);
  return made.empty() ? "unnamed" : made;
}

/// Gives a view its ids. Names that differ have ids that differ, even when they look alike in an address.
Expected<void> name_view(Connection& connection, ViewRecord& view) {
  // The view's own row does not count: it is about to be replaced.
  const std::string others = " AND NOT (path = ? AND dataset = ?) LIMIT 1";
  const std::string campaign = id_of_name(view.campaign_name), run = id_of_name(view.run_name);
  auto id = free_id(campaign, campaign, [&](const std::string& candidate) {
    return exists(connection, "SELECT 1 FROM view WHERE campaign = ? AND campaign_name <> ?" + others,
                  {candidate, view.campaign_name, view.path, view.dataset});
  });
  if (!id) return failure(id);
  view.campaign = *id;
  id = free_id(run, view.campaign + "-" + run, [&](const std::string& candidate) {
    return exists(connection,
                  "SELECT 1 FROM view WHERE run = ? AND (campaign <> ? OR run_name <> ?)" + others,
                  {candidate, view.campaign, view.run_name, view.path, view.dataset});
  });
  if (!id) return failure(id);
  view.run = *id;
  const auto known =
      one<std::string>(connection, "SELECT id FROM view WHERE path = ? AND dataset = ?",
                       {view.path, view.dataset}, [](const Query& row) { return row.text(0); });
  if (!known) return failure(known);
  if (*known) {
    view.id = **known;
    return {};
  }
  const std::string wanted = wanted_view_id(view);
  id = free_id(wanted, wanted, [&](const std::string& candidate) {
    return exists(connection, "SELECT 1 FROM view WHERE id = ?", {candidate});
  });
  if (!id) return failure(id);
  view.id = *id;
  return {};
}

// A condition is the run's when every view states it, and all the same.
constexpr std::string_view run_sql = R"(
SELECT run, max(run_name), campaign, max(campaign_name), max(source), count(*),
       min(azimuth_deg), max(azimuth_deg), min(elevation_deg), max(elevation_deg),
       iif(count(mach) = count(*) AND min(mach) = max(mach), min(mach), NULL),
       iif(count(velocity_m_s) = count(*) AND min(velocity_m_s) = max(velocity_m_s), min(velocity_m_s), NULL),
       iif(count(density_kg_m3) = count(*) AND min(density_kg_m3) = max(density_kg_m3), min(density_kg_m3), NULL),
       iif(count(temperature_k) = count(*) AND min(temperature_k) = max(temperature_k), min(temperature_k), NULL),
       iif(count(reference_length_m) = count(*) AND min(reference_length_m) = max(reference_length_m),
           min(reference_length_m), NULL)
FROM view )";

RunRecord run_of(const Query& row) {
  return {.id = row.text(0),
          .name = row.text(1),
          .campaign = row.text(2),
          .campaign_name = row.text(3),
          .source = row.text(4),
          .views = row.size(5),
          .azimuth_low_deg = row.real_or_none(6),
          .azimuth_high_deg = row.real_or_none(7),
          .elevation_low_deg = row.real_or_none(8),
          .elevation_high_deg = row.real_or_none(9),
          .mach = row.real_or_none(10),
          .velocity_m_s = row.real_or_none(11),
          .density_kg_m3 = row.real_or_none(12),
          .temperature_k = row.real_or_none(13),
          .reference_length_m = row.real_or_none(14)};
}

template <class Columns>
bool is_one_of(const std::string& name, const Columns& columns) {
  return std::ranges::find(columns, name) != columns.end();
}

Expected<void> quick_check(Connection& connection) {
  const auto found =
      one<std::string>(connection, "PRAGMA quick_check(1)", {}, [](const Query& row) { return row.text(0); });
  if (!found) return failure(found);
  if (*found && **found != "ok") {
    return failure(ErrorCode::damaged_state,
                   "the index does not pass its check: " + **found + "; remove it and index anew",
                   "index.sqlite");
  }
  return {};
}

}  // namespace

/// The lock file holds the number of the process that may write. It is emptied on a clean close, so that a
/// number left behind tells of an unclean stop.
class Index::Lock {
 public:
  static Expected<std::unique_ptr<Lock>> take(const fs::path& file) {
    const int descriptor = ::open(file.c_str(), O_RDWR | O_CREAT | O_CLOEXEC, 0640);
    if (descriptor < 0) return system_failure(errno, "opening the lock", file.string());
    std::unique_ptr<Lock> lock(new Lock(descriptor));
    std::array<char, 32> holder{};
    const ssize_t got = ::pread(descriptor, holder.data(), holder.size() - 1, 0);
    if (::flock(descriptor, LOCK_EX | LOCK_NB) != 0) {
      return failure(
          ErrorCode::state_locked,
          fmt::format("process {} writes to this state folder already; stop it, or start with --reader",
                      got > 0 ? holder.data() : "unknown"),
          file.parent_path().string());
    }
    lock->was_left_behind_ = got > 0;
    const std::string mine = fmt::format("{}", ::getpid());
    if (::ftruncate(descriptor, 0) != 0 || ::pwrite(descriptor, mine.data(), mine.size(), 0) < 0) {
      return system_failure(errno, "writing the lock", file.string());
    }
    return lock;
  }
  ~Lock() {
    // A lock that cannot be emptied costs a check at the next start.
    if (is_in_use_) static_cast<void>(::ftruncate(descriptor_, 0) == 0);
    ::close(descriptor_);
  }
  Lock(const Lock&) = delete;
  Lock& operator=(const Lock&) = delete;
  bool was_left_behind() const { return was_left_behind_; }
  /// The index has passed its checks. Until then what the last process left stays to be checked.
  void note_use() { is_in_use_ = true; }

 private:
  explicit Lock(int descriptor) : descriptor_(descriptor) {}
  const int descriptor_;
  bool is_in_use_ = false;
  bool was_left_behind_ = false;
};

Index::Index(fs::path state) : state_(std::move(state)) {}
Index::~Index() = default;

bool Index::was_left_uncleanly() const {
  return lock_ && lock_->was_left_behind();
}

Expected<std::unique_ptr<Index>> Index::open_for_writing(const fs::path& state) {
  std::error_code error;
  for (const char* folder : {"views", "staging", "cache"}) {
    fs::create_directories(state / folder, error);
    if (error) return system_failure(error.value(), "creating the folder", (state / folder).string());
  }
  std::unique_ptr<Index> index(new Index(state));
  auto lock = Lock::take(state / "lock");
  if (!lock) return failure(lock);
  index->lock_ = std::move(*lock);
  auto writer = Connection::open(state / "index.sqlite", true);
  if (!writer) return failure(writer);
  index->writer_ = std::move(*writer);
  if (index->lock_->was_left_behind()) {
    if (auto checked = quick_check(*index->writer_); !checked) return failure(checked);
  }
  if (auto migrated = migrate(*index->writer_, migrations()); !migrated) return failure(migrated);
  index->lock_->note_use();
  return index;
}

Expected<std::unique_ptr<Index>> Index::open_for_reading(const fs::path& state) {
  if (!fs::exists(state / "index.sqlite")) {
    return failure(ErrorCode::not_indexed, "there is no index here; bentlight index makes one",
                   state.string());
  }
  std::unique_ptr<Index> index(new Index(state));
  const auto version =
      index->reading<int>([](Connection& connection) { return version_of(connection, migrations()); });
  if (!version) return failure(version);
  if (*version < migrations().back().version) {
    return failure(ErrorCode::not_indexed,
                   "the index is of an earlier version; bentlight index brings it up to date",
                   state.string());
  }
  return index;
}

template <class Value>
Expected<Value> Index::reading(const std::function<Expected<Value>(Connection&)>& ask) const {
  std::unique_ptr<Connection> connection;
  {
    const std::lock_guard lock(readers_mutex_);
    if (!idle_readers_.empty()) {
      connection = std::move(idle_readers_.back());
      idle_readers_.pop_back();
    }
  }
  if (!connection) {
    auto opened = Connection::open(state_ / "index.sqlite", false);
    if (!opened) return failure(opened);
    connection = std::move(*opened);
  }
  auto answer = ask(*connection);
  const std::lock_guard lock(readers_mutex_);
  constexpr std::size_t kept_readers = 32;
  if (idle_readers_.size() < kept_readers) idle_readers_.push_back(std::move(connection));
  return answer;
}

Expected<void> Index::writing(const std::function<Expected<void>(Connection&)>& change) {
  const std::lock_guard lock(writer_mutex_);
  if (!writer_) return failure(ErrorCode::internal, "this index was opened for reading");
  auto transaction = Transaction::begin(*writer_);
  if (!transaction) return failure(transaction);
  const std::int64_t before = writer_->changed_rows();
  if (auto changed = change(*writer_); !changed) return changed;
  if (writer_->changed_rows() == before) return {};
  if (auto risen = writer_->execute("UPDATE revision SET number = number + 1"); !risen) return risen;
  return transaction->commit();
}

Expected<ViewRecord> Index::upsert_view(ViewRecord record) {
  const auto written = writing([&](Connection& connection) -> Expected<void> {
    if (auto named = name_view(connection, record); !named) return named;
    std::string places = "?";
    for (int i = 1; i < view_column_count; ++i) places += ", ?";
    auto insert =
        connection.query(fmt::format("INSERT OR REPLACE INTO view ({}) VALUES ({})", view_columns, places));
    if (!insert) return failure(insert);
    bind_view(*insert, record);
    if (auto done = insert->run(); !done) return done;
    auto forget = connection.query("DELETE FROM refusal WHERE path = ?");
    if (!forget) return failure(forget);
    return forget->bind(std::string_view(record.path)).run();
  });
  if (!written) return failure(written);
  return record;
}

Expected<void> Index::mark_missing(const std::string& path) {
  return writing([&](Connection& connection) -> Expected<void> {
    auto mark = connection.query("UPDATE view SET state = 'missing' WHERE path = ? AND state <> 'missing'");
    if (!mark) return failure(mark);
    if (auto done = mark->bind(std::string_view(path)).run(); !done) return done;
    auto forget = connection.query("DELETE FROM refusal WHERE path = ?");
    if (!forget) return failure(forget);
    return forget->bind(std::string_view(path)).run();
  });
}

Expected<void> Index::mark_present(const std::string& path) {
  return writing([&](Connection& connection) -> Expected<void> {
    auto mark = connection.query("UPDATE view SET state = 'ready' WHERE path = ? AND state <> 'ready'");
    if (!mark) return failure(mark);
    return mark->bind(std::string_view(path)).run();
  });
}

Expected<void> Index::read_again(const std::string& id) {
  return writing([&](Connection& connection) -> Expected<void> {
    auto forget = connection.query("UPDATE view SET size_bytes = 0, mtime_ns = 0, inode = 0 WHERE id = ?");
    if (!forget) return failure(forget);
    return forget->bind(std::string_view(id)).run();
  });
}

Expected<void> Index::put_refusal(const RefusalRecord& refusal) {
  return writing([&](Connection& connection) -> Expected<void> {
    // The same refusal again changes nothing.
    auto put = connection.query(R"(
INSERT INTO refusal (path, code, text, refused_at_ms, size_bytes, mtime_ns, inode) VALUES (?, ?, ?, ?, ?, ?, ?)
ON CONFLICT (path) DO UPDATE
SET code = excluded.code, text = excluded.text, refused_at_ms = excluded.refused_at_ms,
    size_bytes = excluded.size_bytes, mtime_ns = excluded.mtime_ns, inode = excluded.inode
WHERE (code, text, size_bytes, mtime_ns, inode) IS NOT
      (excluded.code, excluded.text, excluded.size_bytes, excluded.mtime_ns, excluded.inode))");
    if (!put) return failure(put);
    put->bind(std::string_view(refusal.path))
        .bind(std::string_view(refusal.code))
        .bind(std::string_view(refusal.text));
    put->bind(refusal.refused_at_ms)
        .bind(refusal.stamp.size_bytes)
        .bind(refusal.stamp.mtime_ns)
        .bind(refusal.stamp.inode);
    if (auto done = put->run(); !done) return done;
    // A view of this path was of another state of the file, which is gone.
    auto mark = connection.query("UPDATE view SET state = 'missing' WHERE path = ? AND state <> 'missing'");
    if (!mark) return failure(mark);
    return mark->bind(std::string_view(refusal.path)).run();
  });
}

Expected<ViewRecord> Index::view(const std::string& id) const {
  return reading<ViewRecord>([&](Connection& connection) -> Expected<ViewRecord> {
    static const std::string sql = fmt::format("SELECT {} FROM view WHERE id = ?", view_columns);
    auto found = one<ViewRecord>(connection, sql, {id}, view_of);
    if (!found) return failure(found);
    if (!*found) return failure(ErrorCode::unknown_view, fmt::format("there is no view {}", id), id);
    return std::move(**found);
  });
}

Expected<Page<ViewRecord>> Index::views(const ViewFilter& filter) const {
  if (!is_one_of(filter.sort, sort_columns)) {
    return failure(ErrorCode::bad_parameter, filter.sort + " is no column to sort by", "sort");
  }
  std::string where = " WHERE 1";
  std::vector<std::string> texts;
  std::vector<double> numbers;
  const auto equal = [&](const char* column, const std::optional<std::string>& value) {
    if (!value) return;
    where += fmt::format(" AND {} = ?", column);
    texts.push_back(*value);
  };
  equal("campaign", filter.campaign);
  equal("run", filter.run);
  equal("source", filter.source);
  equal("state", filter.state);
  for (const auto& [column, range] : filter.ranges) {
    if (!is_one_of(column, range_columns)) {
      return failure(ErrorCode::bad_parameter, column + " is no column with a range", column);
    }
    if (range.low) where += fmt::format(" AND {} >= ?", column), numbers.push_back(*range.low);
    if (range.high) where += fmt::format(" AND {} <= ?", column), numbers.push_back(*range.high);
  }
  const std::string sql = fmt::format("SELECT {} FROM view{} ORDER BY {} {}, id LIMIT ? OFFSET ?",
                                      view_columns, where, filter.sort, filter.descending ? "DESC" : "ASC");
  return reading<Page<ViewRecord>>([&](Connection& connection) -> Expected<Page<ViewRecord>> {
    auto query = connection.query(sql);
    if (!query) return failure(query);
    for (const auto& text : texts) query->bind(std::string_view(text));
    for (const double number : numbers) query->bind(number);
    query->bind(std::uint64_t{filter.limit + 1}).bind(std::uint64_t{filter.offset});
    return page<ViewRecord>(*query, filter.limit, view_of);
  });
}

Expected<std::vector<ViewRecord>> Index::views_of_run(const std::string& run) const {
  return reading<std::vector<ViewRecord>>([&](Connection& connection) -> Expected<std::vector<ViewRecord>> {
    static const std::string sql = fmt::format(
        "SELECT {} FROM view WHERE run = ? AND state = 'ready' ORDER BY azimuth_deg, elevation_deg, id",
        view_columns);
    auto query = connection.query(sql);
    if (!query) return failure(query);
    query->bind(std::string_view(run));
    return all<ViewRecord>(*query, view_of);
  });
}

Expected<RunRecord> Index::run(const std::string& id) const {
  return reading<RunRecord>([&](Connection& connection) -> Expected<RunRecord> {
    static const std::string sql = fmt::format("{}WHERE run = ? GROUP BY run", run_sql);
    auto found = one<RunRecord>(connection, sql, {id}, run_of);
    if (!found) return failure(found);
    if (!*found) return failure(ErrorCode::unknown_run, fmt::format("there is no run {}", id), id);
    return std::move(**found);
  });
}

Expected<Page<RunRecord>> Index::runs(const RunFilter& filter, std::size_t limit, std::size_t offset) const {
  return reading<Page<RunRecord>>([&](Connection& connection) -> Expected<Page<RunRecord>> {
    static const std::string sql = fmt::format(
        "{}WHERE (?1 = '' OR campaign = ?1) AND (?2 = '' OR source = ?2) GROUP BY run ORDER BY run LIMIT ?3 "
        "OFFSET ?4",
        run_sql);
    auto query = connection.query(sql);
    if (!query) return failure(query);
    query->bind(std::string_view(filter.campaign.value_or("")))
        .bind(std::string_view(filter.source.value_or("")));
    query->bind(std::uint64_t{limit + 1}).bind(std::uint64_t{offset});
    return page<RunRecord>(*query, limit, run_of);
  });
}

Expected<Page<CampaignRecord>> Index::campaigns(std::size_t limit, std::size_t offset) const {
  return reading<Page<CampaignRecord>>([&](Connection& connection) -> Expected<Page<CampaignRecord>> {
    auto query = connection.query(
        R"(
SELECT campaign, max(campaign_name), count(DISTINCT run), count(*)
FROM view GROUP BY campaign ORDER BY campaign LIMIT ? OFFSET ?)");
    if (!query) return failure(query);
    query->bind(std::uint64_t{limit + 1}).bind(std::uint64_t{offset});
    return page<CampaignRecord>(*query, limit, [](const Query& row) {
      return CampaignRecord{
          .id = row.text(0), .name = row.text(1), .runs = row.size(2), .views = row.size(3)};
    });
  });
}

Expected<Page<RefusalRecord>> Index::refusals(std::size_t limit, std::size_t offset) const {
  return reading<Page<RefusalRecord>>([&](Connection& connection) -> Expected<Page<RefusalRecord>> {
    auto query = connection.query(
        "SELECT path, code, text, refused_at_ms FROM refusal ORDER BY path LIMIT ? OFFSET ?");
    if (!query) return failure(query);
    query->bind(std::uint64_t{limit + 1}).bind(std::uint64_t{offset});
    return page<RefusalRecord>(*query, limit, [](const Query& row) {
      return RefusalRecord{
          .path = row.text(0), .code = row.text(1), .text = row.text(2), .refused_at_ms = row.whole(3)};
    });
  });
}

Expected<IndexCounts> Index::counts() const {
  return reading<IndexCounts>([](Connection& connection) -> Expected<IndexCounts> {
    auto found = one<IndexCounts>(connection,
                                  R"(
SELECT count(DISTINCT campaign), count(DISTINCT run), count(*), count(*) FILTER (WHERE state = 'missing'),
       (SELECT count(*) FROM refusal), coalesce(sum(frames), 0), coalesce(sum(size_bytes), 0),
       (SELECT number FROM revision)
FROM view)",
                                  {}, [](const Query& row) {
                                    return IndexCounts{.campaigns = row.size(0),
                                                       .runs = row.size(1),
                                                       .views = row.size(2),
                                                       .missing = row.size(3),
                                                       .refusals = row.size(4),
                                                       .frames = row.size(5),
                                                       .bytes = row.size(6),
                                                       .revision = row.size(7)};
                                  });
    if (!found) return failure(found);
    return found->value_or(IndexCounts{});
  });
}

Expected<std::vector<KnownFile>> Index::known_files() const {
  return reading<std::vector<KnownFile>>([](Connection& connection) -> Expected<std::vector<KnownFile>> {
    // A path that was refused last is known by its refusal.
    auto query = connection.query(R"(
SELECT path, size_bytes, mtime_ns, inode, 'refused', '' FROM refusal
UNION ALL
SELECT path, size_bytes, mtime_ns, inode, state, folder FROM view WHERE path NOT IN (SELECT path FROM refusal))");
    if (!query) return failure(query);
    return all<KnownFile>(*query, [](const Query& row) {
      return KnownFile{.path = row.text(0),
                       .stamp = {.size_bytes = row.size(1), .mtime_ns = row.whole(2), .inode = row.size(3)},
                       .state = row.text(4),
                       .folder = row.text(5)};
    });
  });
}

Expected<std::vector<std::string>> Index::folders() const {
  return reading<std::vector<std::string>>([](Connection& connection) -> Expected<std::vector<std::string>> {
    auto query = connection.query("SELECT folder FROM view");
    if (!query) return failure(query);
    return all<std::string>(*query, [](const Query& row) { return row.text(0); });
  });
}

}  // namespace bentlight::index
