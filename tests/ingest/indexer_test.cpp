#include "ingest/indexer.h"

#include <fcntl.h>
#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <sys/wait.h>
#include <unistd.h>

#include <atomic>
#include <fstream>
#include <nlohmann/json.hpp>
#include <set>

#include "base/sealed_folder.h"
#include "index/summary_store.h"
#include "support/command.h"
#include "support/faulty_files.h"
#include "support/small_archive.h"
#include "support/temporary_folder.h"

namespace bentlight::ingest {
namespace {

namespace fs = std::filesystem;
using testing::ElementsAre;
using testing::HasSubstr;
using testing::IsEmpty;
using testing::UnorderedElementsAre;

constexpr std::size_t good_files = 5, broken_files = 3;

/// Everything an indexer needs, as long as it lives the only writer of its state folder.
class Session {
 public:
  Session(const fs::path& archive, const fs::path& state, test::FileCounts& counts, std::size_t threads = 1)
      : files_(counts),
        index(index::Index::open_for_writing(state).value()),
        pool_(threads),
        log_(stream_),
        indexer({files_, probe_, *index, pool_, log_}, archive, state) {}
  ~Session() { std::fclose(stream_); }

  Expected<IndexProgress> run() { return indexer.run(stop.get_token()); }

 private:
  std::FILE* stream_ = std::fopen("/dev/null", "w");
  const test::FaultyFiles files_;
  const archive::ProbeClient probe_{BENTLIGHT_PROBE};

 public:
  std::stop_source stop;
  const std::unique_ptr<index::Index> index;

 private:
  WorkPool pool_;
  Log log_;

 public:
  Indexer indexer;
};

class AnIndexer : public testing::Test {
 protected:
  AnIndexer() { fs::copy(test::small_archive(), archive_, fs::copy_options::recursive); }

  void open() { session_ = std::make_unique<Session>(archive_, state_, counts_); }
  void close() { session_.reset(); }

  IndexProgress run() {
    if (!session_) open();
    counts_.opened = counts_.stamped = counts_.bytes_read = 0;
    const auto report = session_->run();
    EXPECT_TRUE(report) << report.error().text;
    return report.value_or(IndexProgress{});
  }

  index::Index& index() { return *session_->index; }
  std::vector<index::ViewRecord> views() { return index().views({.limit = 1000}).value().items; }
  index::ViewRecord view(const std::string& path) {
    for (const auto& found : views()) {
      if (found.path == path) return found;
    }
    ADD_FAILURE() << "no view of " << path;
    return {};
  }
  std::map<std::string, std::string> refusals() {
    std::map<std::string, std::string> codes;
    const auto listed = index().refusals(1000, 0).value();
    for (const auto& refusal : listed.items) codes[refusal.path] = refusal.code;
    return codes;
  }
  std::set<std::string> folders() const {
    std::set<std::string> names;
    for (const auto& entry : fs::directory_iterator(state_ / "views")) names.insert(entry.path().filename());
    return names;
  }

  /// What must hold after any end of an indexer: each view's summary is there and whole, and nothing else is.
  void expect_consistent() {
    std::set<std::string> used;
    const PosixFileSystem files;
    for (const auto& record : views()) {
      SCOPED_TRACE(record.path);
      used.insert(record.folder);
      const auto sealed = SealedFolder::open(files, state_ / "views" / record.folder);
      ASSERT_TRUE(sealed) << sealed.error().text;
      const auto summary = index::SummaryReader::open(*sealed);
      ASSERT_TRUE(summary) << summary.error().text;
      EXPECT_EQ(summary->frames(), record.frames);
      for (const auto& entry : fs::directory_iterator(state_ / "views" / record.folder)) {
        const std::string name = entry.path().filename();
        EXPECT_TRUE(name == "manifest.txt" || (*sealed)->read_all(name)) << name;
      }
      EXPECT_TRUE(archive::load_wavefront_file(files, state_ / "views" / record.folder));
    }
    EXPECT_EQ(folders(), used);
    EXPECT_TRUE(fs::is_empty(state_ / "staging"));
  }

  const test::TemporaryFolder folder_;
  const fs::path archive_ = folder_.path() / "archive", state_ = folder_.path() / "state";
  test::FileCounts counts_;
  std::unique_ptr<Session> session_;
};

TEST_F(AnIndexer, IndexesWhatItCanAndSaysWhyItRefusesTheRest) {
  const IndexProgress report = run();

  EXPECT_EQ(report.indexed, good_files);
  EXPECT_EQ(report.refused, broken_files);
  EXPECT_EQ(report.files_done, report.files_total);
  EXPECT_EQ(report.files_total, good_files + broken_files);
  EXPECT_EQ(report.bytes_done, report.bytes_total);
  EXPECT_FALSE(report.is_running);
  EXPECT_EQ(views().size(), good_files);
  const auto codes = refusals();
  EXPECT_EQ(codes.at("broken/text.h5"), "not-hdf5");
  EXPECT_EQ(codes.at("broken/empty.hdf5"), "not-hdf5");
  EXPECT_EQ(codes.at("broken/cut.h5"), "damaged-file");
  EXPECT_EQ(codes.size(), broken_files);
  expect_consistent();
}

TEST_F(AnIndexer, KeepsTheConditionsThatAFileStates) {
  run();
  const auto record = view("simulation/double.h5");

  EXPECT_EQ(record.id, "m05-simulation-az097.5-el30");
  EXPECT_EQ(record.dataset, "/opd");
  EXPECT_EQ(record.campaign_name, "Wall dome");
  EXPECT_EQ(record.source, "simulation");
  EXPECT_EQ(record.note, "a note");
  EXPECT_EQ(record.azimuth_deg, 97.5);
  EXPECT_EQ(record.mach, 0.5);
  EXPECT_EQ(record.velocity_m_s, 170.0);
  EXPECT_EQ(record.gladstone_dale_m3_kg, std::nullopt);
  EXPECT_EQ(record.frames, 300U);
  EXPECT_EQ(record.rows, 20U);
  EXPECT_EQ(record.columns, 22U);
  EXPECT_EQ(record.finite_frames, 300U);
  EXPECT_EQ(record.frame_rate_hz, 25e3);
  EXPECT_DOUBLE_EQ(record.duration_s, 299 / 25e3);
  EXPECT_EQ(record.stamp, PosixFileSystem().stamp(archive_ / record.path));
  EXPECT_EQ(record.state, "ready");
  EXPECT_EQ(view("simulation/nan.h5").id, "m05-simulation-azm060-el30");
  EXPECT_EQ(index().counts().value().runs, 2U);
}

TEST_F(AnIndexer, FindsEveryFaultOfAFaultyView) {
  run();
  std::map<std::string, double> found;
  for (const auto& check : nlohmann::json::parse(view("tunnel/faulty.h5").checks)) {
    found[check.at("code")] = check.at("figure");
    EXPECT_FALSE(check.at("text").get<std::string>().empty());
    EXPECT_EQ(check.at("severity"), "warning");
  }

  EXPECT_DOUBLE_EQ(found["frames-with-nan"], 4.0 / 300);
  EXPECT_EQ(found["repeated-frames"], 1);
  EXPECT_EQ(found["dropped-frames"], 4);
  EXPECT_EQ(found["dead-points"], 9);
  EXPECT_EQ(found.size(), 4U);
  EXPECT_EQ(view("tunnel/faulty.h5").finite_frames, 296U);
  for (const char* path :
       {"tunnel/plain.h5", "tunnel/deflated.h5", "simulation/double.h5", "simulation/nan.h5"}) {
    EXPECT_EQ(view(path).checks, "[]") << path;
  }
}

TEST_F(AnIndexer, AgreesWithNumPy) {
  run();
  for (const auto& record : views()) {
    const auto finished = testing_support::run(
        fmt::format("/usr/bin/python3 {}/tests/reference/summary_reference.py '{}' '{}'", BENTLIGHT_SOURCE,
                    (archive_ / record.path).string(), (state_ / "views" / record.folder).string()));
    EXPECT_EQ(finished.status, 0) << record.path << "\n" << finished.output;
  }
}

TEST_F(AnIndexer, TakesAStatForAnUnchangedFile) {
  run();
  const auto revision = index().counts().value().revision;
  close();

  const IndexProgress report = run();

  EXPECT_EQ(report.unchanged, good_files + broken_files);
  EXPECT_EQ(report.indexed + report.refused, 0U);
  EXPECT_EQ(counts_.opened, 0U);
  EXPECT_EQ(counts_.stamped, good_files + broken_files);
  EXPECT_EQ(index().counts().value().revision, revision);
}

TEST_F(AnIndexer, IndexesAChangedFileAnewUnderItsId) {
  run();
  const auto before = view("tunnel/plain.h5");
  fs::copy_file(archive_ / "tunnel/deflated.h5", archive_ / "tunnel/plain.h5",
                fs::copy_options::overwrite_existing);

  const IndexProgress report = run();

  EXPECT_EQ(report.indexed, 1U);
  EXPECT_EQ(report.unchanged, good_files + broken_files - 1);
  const auto after = view("tunnel/plain.h5");
  EXPECT_EQ(after.id, before.id);
  EXPECT_EQ(after.azimuth_deg, 120.0);
  EXPECT_NE(after.folder, before.folder);
  EXPECT_EQ(views().size(), good_files);
  expect_consistent();
}

TEST_F(AnIndexer, MarksAVanishedFileAndReadsItNotAgainWhenItIsBack) {
  run();
  const auto before = view("tunnel/plain.h5");
  fs::rename(archive_ / "tunnel", folder_.path() / "elsewhere");

  EXPECT_EQ(run().missing, 3U);
  EXPECT_EQ(view("tunnel/plain.h5").state, "missing");
  EXPECT_EQ(run().missing, 0U);

  fs::rename(folder_.path() / "elsewhere", archive_ / "tunnel");
  EXPECT_EQ(run().unchanged, good_files + broken_files);
  EXPECT_EQ(counts_.opened, 0U);
  const auto after = view("tunnel/plain.h5");
  EXPECT_EQ(after.state, "ready");
  EXPECT_EQ(after.folder, before.folder);
  expect_consistent();
}

TEST_F(AnIndexer, ForgetsTheRefusalOfAFileThatIsGoneOrMended) {
  run();
  fs::remove(archive_ / "broken/text.h5");
  fs::copy_file(archive_ / "tunnel/plain.h5", archive_ / "broken/cut.h5",
                fs::copy_options::overwrite_existing);

  EXPECT_EQ(run().indexed, 1U);

  EXPECT_EQ(refusals().size(), 1U);
  EXPECT_EQ(view("broken/cut.h5").id, "m05-tunnel-az090-el30-2");
}

TEST_F(AnIndexer, MarksTheViewOfAFileThatIsBrokenNow) {
  run();
  fs::resize_file(archive_ / "tunnel/plain.h5", 1000);

  EXPECT_EQ(run().refused, 1U);

  EXPECT_EQ(refusals().at("tunnel/plain.h5"), "damaged-file");
  EXPECT_EQ(view("tunnel/plain.h5").state, "missing");
}

TEST_F(AnIndexer, RefusesAFileThatChangesUnderItsHandsAndReadsItNextTime) {
  std::atomic<bool> has_changed{false};
  counts_.before_read = [&](const fs::path& path) {
    if (path.filename() != "plain.h5" || has_changed.exchange(true)) return;
    fs::last_write_time(path, fs::last_write_time(path) + std::chrono::seconds(1));
  };

  run();
  EXPECT_TRUE(has_changed);
  EXPECT_EQ(refusals().at("tunnel/plain.h5"), "file-changed");
  EXPECT_EQ(views().size(), good_files - 1);
  expect_consistent();

  EXPECT_EQ(run().indexed, 1U);
  EXPECT_EQ(views().size(), good_files);
}

TEST_F(AnIndexer, TriesAgainWhatWasRefusedForAReasonThatMayPass) {
  run();
  ASSERT_TRUE(index().put_refusal({.path = "tunnel/plain.h5", .code = "permission-denied", .text = "no"}));

  EXPECT_EQ(run().indexed, 1U);
  EXPECT_EQ(view("tunnel/plain.h5").state, "ready");
}

TEST_F(AnIndexer, ReadsAgainWhatIsDamaged) {
  run();
  ASSERT_TRUE(index().read_again(view("tunnel/plain.h5").id));

  EXPECT_EQ(run().indexed, 1U);
  EXPECT_EQ(run().indexed, 0U);
}

TEST_F(AnIndexer, LooksAtItsSummariesAfterAnUncleanStop) {
  run();
  const std::string damaged = view("tunnel/plain.h5").folder;
  close();
  fs::resize_file(state_ / "views" / damaged / "coefficients.npy", 100);
  std::ofstream(state_ / "lock") << "12345";

  EXPECT_EQ(run().indexed, 1U);

  EXPECT_NE(view("tunnel/plain.h5").folder, damaged);
  expect_consistent();
}

TEST_F(AnIndexer, RemovesWhatAnEarlierProcessLeftBehind) {
  open();
  fs::create_directories(state_ / "views" / "orphan");
  fs::create_directories(state_ / "staging" / "half");
  std::ofstream(state_ / "staging" / "half" / "coefficients.npy") << "torn";

  run();

  expect_consistent();
}

TEST_F(AnIndexer, SaysThatThereIsNoArchiveAndForgetsNothing) {
  run();
  fs::rename(archive_, folder_.path() / "away");

  const auto report = session_->run();

  ASSERT_FALSE(report);
  EXPECT_EQ(report.error().code, ErrorCode::file_missing);
  EXPECT_EQ(view("tunnel/plain.h5").state, "ready");
  EXPECT_EQ(session_->indexer.progress().error->code, ErrorCode::file_missing);
  expect_consistent();
}

TEST_F(AnIndexer, StopsWhenAskedAndGoesOnNextTime) {
  open();
  // In the middle of the third file.
  std::atomic<int> reads{0};
  counts_.before_read = [&](const fs::path& path) {
    if (path.filename() == "deflated.h5" && ++reads == 3) session_->stop.request_stop();
  };

  const auto report = session_->run();

  ASSERT_FALSE(report);
  EXPECT_EQ(report.error().code, ErrorCode::cancelled);
  EXPECT_EQ(views().size(), 2U);  // simulation/double.h5, simulation/nan.h5
  EXPECT_EQ(refusals().count("tunnel/deflated.h5"), 0U);
  expect_consistent();
  counts_.before_read = {};
  close();
  EXPECT_EQ(run().indexed, good_files - 2);
}

TEST_F(AnIndexer, StopsOnAFullDiskAndLosesNothing) {
  open();
  std::size_t stopped = 0;
  for (std::int64_t room = 0; room < 3'000'000; room += 90'000) {
    SCOPED_TRACE(room);
    counts_.room = room;
    const auto report = session_->run();
    if (!report) {
      ++stopped;
      EXPECT_EQ(report.error().code, ErrorCode::disk_full);
    }
    for (const auto& [path, code] : refusals()) EXPECT_THAT(path, HasSubstr("broken/")) << code;
    expect_consistent();
    if (report) break;
  }

  EXPECT_GE(stopped, 3U);
  EXPECT_EQ(views().size(), good_files);
}

// Killed at writes all over the way, from one of the first to one of the last.
TEST_F(AnIndexer, LosesNothingWhenItIsKilled) {
  close();
  std::set<std::size_t> views_left;
  for (int writes = 5; writes < 160; writes += 26) {
    SCOPED_TRACE(writes);
    fs::remove_all(state_);
    const pid_t child = ::fork();
    if (child == 0) {
      counts_.writes_left = writes;
      Session session(archive_, state_, counts_);
      static_cast<void>(session.run());
      ::_exit(0);
    }
    int status = 0;
    ::waitpid(child, &status, 0);
    if (WIFEXITED(status)) break;  // it came to its end

    open();
    const std::size_t left = views().size();
    views_left.insert(left);
    const IndexProgress report = run();
    EXPECT_EQ(left + report.indexed, good_files);  // what was there is not read again
    expect_consistent();
    close();
  }
  EXPECT_GE(views_left.size(), 3U);
}

// The same bytes for any number of threads, and whether frames were kept or read again.
TEST_F(AnIndexer, KeepsTheSameSummaryWhateverTheThreads) {
  std::vector<std::map<std::string, std::string>> manifests;
  for (const std::size_t threads : {0U, 1U, 3U}) {
    const fs::path state = folder_.path() / fmt::format("state-{}", threads);
    Session session(archive_, state, counts_, threads);
    ASSERT_TRUE(session.run());
    auto& manifest = manifests.emplace_back();
    const auto listed = session.index->views({.limit = 100}).value();
    for (const auto& record : listed.items) {
      manifest[record.path] =
          read_whole(PosixFileSystem(), state / "views" / record.folder / "manifest.txt", 1 << 20).value();
    }
  }

  EXPECT_EQ(manifests[0].size(), good_files);
  EXPECT_EQ(manifests[1], manifests[0]);
  EXPECT_EQ(manifests[2], manifests[0]);
}

TEST_F(AnIndexer, PlacesAFileThatNamesNoRunByItsFolders) {
  const auto finished =
      testing_support::run(fmt::format("/usr/bin/python3 -c \"import h5py\nfile = h5py.File('{}', 'a')\nfor "
                                       "name in ['campaign', 'run', 'azimuth_deg']: del "
                                       "file.attrs[name]\"",
                                       (archive_ / "tunnel/plain.h5").string()));
  ASSERT_EQ(finished.status, 0) << finished.output;
  fs::create_directories(archive_ / "Spring/Run 7");
  fs::rename(archive_ / "tunnel/plain.h5", archive_ / "Spring/Run 7/Window A.h5");
  fs::copy_file(archive_ / "Spring/Run 7/Window A.h5", archive_ / "loose.h5");

  run();

  const auto placed = view("Spring/Run 7/Window A.h5");
  EXPECT_EQ(placed.campaign_name, "Spring");
  EXPECT_EQ(placed.run_name, "Run 7");
  EXPECT_EQ(placed.id, "run-7-window-a");
  EXPECT_EQ(view("loose.h5").campaign, "unnamed");
}

/// Indexes as a user for whom permissions count, in a process of its own; the status tells what went wrong.
[[noreturn]] void index_as_nobody(const fs::path& archive, const fs::path& state) {
  constexpr uid_t nobody = 65534;
  if (::geteuid() == 0 && ::setuid(nobody) != 0) ::_exit(10);
  test::FileCounts counts;
  Session session(archive, state, counts);
  const auto report = session.run();
  if (!report || report->missing != 0) ::_exit(1);
  const auto refusals = session.index->refusals(100, 0).value().items;
  const auto closed = std::ranges::find(refusals, "tunnel", &index::RefusalRecord::path);
  if (closed == refusals.end() || closed->code != "permission-denied") ::_exit(2);
  const auto listed = session.index->views({.limit = 100}).value();
  for (const auto& view : listed.items) {
    if (view.state != "ready") ::_exit(3);
  }
  ::_exit(0);
}

TEST_F(AnIndexer, LeavesTheViewsBelowAFolderThatCannotBeReadForNow) {
  run();
  close();
  ASSERT_EQ(testing_support::run(fmt::format("chmod -R a+rwX '{}'", folder_.path().string())).status, 0);
  fs::permissions(archive_ / "tunnel", fs::perms::none);

  EXPECT_EXIT(index_as_nobody(archive_, state_), testing::ExitedWithCode(0), "");

  fs::permissions(archive_ / "tunnel", fs::perms::all);
  run();
  EXPECT_EQ(refusals().count("tunnel"), 0U);
}

}  // namespace
}  // namespace bentlight::ingest
