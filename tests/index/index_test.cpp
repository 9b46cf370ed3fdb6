#include "index/index.h"

#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <signal.h>
#include <sys/wait.h>
#include <unistd.h>

#include <algorithm>
#include <atomic>
#include <fstream>
#include <random>
#include <regex>
#include <thread>
#include <tuple>

#include "index/database.h"
#include "support/temporary_folder.h"
#include "support/view_records.h"

namespace bentlight::index {
namespace {

namespace fs = std::filesystem;
using test::view_record;
using testing::ElementsAre;
using testing::HasSubstr;
using testing::IsEmpty;

class AnIndex : public testing::Test {
 protected:
  ViewRecord add(const ViewRecord& record) { return index_->upsert_view(record).value(); }
  std::string id_of(const ViewRecord& record) { return add(record).id; }
  std::uint64_t revision() const { return index_->counts().value().revision; }

  std::vector<std::string> ids(const ViewFilter& filter) const {
    std::vector<std::string> found;
    const auto listed = index_->views(filter).value();
    for (const auto& view : listed.items) found.push_back(view.id);
    return found;
  }

  const test::TemporaryFolder folder_;
  const fs::path state_ = folder_.path() / "state";
  std::unique_ptr<Index> index_ = Index::open_for_writing(state_).value();
};

void expect_same(const ViewRecord& a, const ViewRecord& b) {
  EXPECT_EQ(
      std::tie(a.id, a.path, a.dataset, a.campaign, a.campaign_name, a.run, a.run_name, a.source, a.note),
      std::tie(b.id, b.path, b.dataset, b.campaign, b.campaign_name, b.run, b.run_name, b.source, b.note));
  EXPECT_EQ(
      std::tie(a.azimuth_deg, a.elevation_deg, a.aperture_diameter_m, a.reference_length_m, a.mach,
               a.velocity_m_s, a.density_kg_m3, a.temperature_k, a.wavelength_m, a.gladstone_dale_m3_kg),
      std::tie(b.azimuth_deg, b.elevation_deg, b.aperture_diameter_m, b.reference_length_m, b.mach,
               b.velocity_m_s, b.density_kg_m3, b.temperature_k, b.wavelength_m, b.gladstone_dale_m3_kg));
  EXPECT_EQ(std::tie(a.frames, a.rows, a.columns, a.points, a.finite_frames, a.frame_rate_hz, a.duration_s,
                     a.start_s),
            std::tie(b.frames, b.rows, b.columns, b.points, b.finite_frames, b.frame_rate_hz, b.duration_s,
                     b.start_s));
  EXPECT_EQ(a.stamp, b.stamp);
  EXPECT_EQ(std::tie(a.metadata_digest, a.folder, a.state, a.indexed_at_ms, a.checks, a.opd_rms_mean_m,
                     a.opd_rms_overall_m),
            std::tie(b.metadata_digest, b.folder, b.state, b.indexed_at_ms, b.checks, b.opd_rms_mean_m,
                     b.opd_rms_overall_m));
}

TEST_F(AnIndex, GivesBackAViewBitByBit) {
  const ViewRecord kept = add(view_record("a.h5"));

  expect_same(index_->view(kept.id).value(), kept);
  EXPECT_EQ(kept.note, view_record("a.h5").note);
  EXPECT_EQ(kept.stamp, view_record("a.h5").stamp);
}

TEST_F(AnIndex, KeepsEmptyWhatAFileDoesNotSay) {
  ViewRecord bare;
  bare.path = "a.h5";
  const ViewRecord kept = add(bare);

  const auto view = index_->view(kept.id).value();
  expect_same(view, kept);
  EXPECT_EQ(view.mach, std::nullopt);
  EXPECT_EQ(view.azimuth_deg, std::nullopt);
}

TEST_F(AnIndex, SurvivesItsProcess) {
  const ViewRecord kept = add(view_record("a.h5"));
  index_.reset();

  expect_same(Index::open_for_writing(state_).value()->view(kept.id).value(), kept);
  expect_same(Index::open_for_reading(state_).value()->view(kept.id).value(), kept);
}

TEST_F(AnIndex, NamesAViewByRunAndAngles) {
  EXPECT_EQ(id_of(view_record("a.h5", 90, 30)), "m05-tunnel-az090-el30");
  EXPECT_EQ(id_of(view_record("b.h5", 97.5, 7.25)), "m05-tunnel-az097.5-el07.25");
  EXPECT_EQ(id_of(view_record("c.h5", -5, -0.5)), "m05-tunnel-azm005-elm00.5");
  EXPECT_EQ(id_of(view_record("d.h5", 119.99999999, -0.001)), "m05-tunnel-az120-el00");
  EXPECT_EQ(id_of(view_record("e.h5", 1e6, 1e6)), "m05-tunnel-az1000000-el1000000");
}

TEST_F(AnIndex, NamesAViewWithoutAnglesByItsFile) {
  ViewRecord view = view_record("folder/Window 3 (new).h5");
  view.elevation_deg.reset();
  EXPECT_EQ(id_of(view), "m05-tunnel-window-3-new");
  view.path = "folder/光.h5";
  EXPECT_EQ(id_of(view), "m05-tunnel-view");
}

TEST_F(AnIndex, NumbersViewsThatWouldHaveTheSameName) {
  EXPECT_EQ(id_of(view_record("a.h5")), "m05-tunnel-az090-el30");
  EXPECT_EQ(id_of(view_record("b.h5")), "m05-tunnel-az090-el30-2");
  EXPECT_EQ(id_of(view_record("c.h5")), "m05-tunnel-az090-el30-3");
}

TEST_F(AnIndex, LeavesAPathTheIdThatItOnceHad) {
  ASSERT_EQ(id_of(view_record("a.h5")), "m05-tunnel-az090-el30");
  ASSERT_EQ(id_of(view_record("b.h5")), "m05-tunnel-az090-el30-2");

  ViewRecord turned = view_record("b.h5", 10, 10);
  turned.run_name = "another run";
  const ViewRecord kept = add(turned);

  EXPECT_EQ(kept.id, "m05-tunnel-az090-el30-2");
  EXPECT_EQ(kept.run, "another-run");
  EXPECT_EQ(index_->counts().value().views, 2U);
}

TEST_F(AnIndex, TellsRunsOfTwoCampaignsApart) {
  EXPECT_EQ(add(view_record("a.h5")).run, "m05-tunnel");
  ViewRecord other = view_record("b.h5");
  other.campaign_name = "Flight 2";

  const ViewRecord kept = add(other);

  EXPECT_EQ(kept.run, "flight-2-m05-tunnel");
  EXPECT_EQ(kept.id, "flight-2-m05-tunnel-az090-el30");
  EXPECT_EQ(add(other).run, kept.run);  // indexed again
  EXPECT_EQ(add(view_record("a.h5")).run, "m05-tunnel");
}

TEST_F(AnIndex, TellsNamesApartThatAnAddressCannot) {
  std::vector<std::string> campaigns, runs;
  for (const char* name : {"风洞一", "风洞二", "Tunnel 1", "tunnel-1"}) {
    ViewRecord view = view_record(std::string(name) + ".h5");
    view.campaign_name = view.run_name = name;
    const ViewRecord kept = add(view);
    campaigns.push_back(kept.campaign);
    runs.push_back(kept.run);
  }

  EXPECT_THAT(campaigns, ElementsAre("unnamed", "unnamed-2", "tunnel-1", "tunnel-1-2"));
  EXPECT_THAT(runs, ElementsAre("unnamed", "unnamed-2-unnamed", "tunnel-1", "tunnel-1-2-tunnel-1"));
  EXPECT_EQ(index_->campaigns(10, 0).value().items.size(), 4U);
}

TEST_F(AnIndex, GivesIdsThatAreFitForAnAddress) {
  std::mt19937 random(5);
  const std::regex fit("[\\w.-]+");
  for (int trial = 0; trial < 200; ++trial) {
    ViewRecord view =
        view_record(fmt::format("{}.h5", trial), static_cast<double>(random() % 7200) / 20 - 180);
    for (auto* name : {&view.campaign_name, &view.run_name}) {
      name->resize(random() % 4);
      for (char& c : *name) c = static_cast<char>(random());
    }
    const ViewRecord kept = add(view);
    for (const auto& id : {kept.id, kept.run, kept.campaign}) EXPECT_TRUE(std::regex_match(id, fit)) << id;
  }
  EXPECT_EQ(index_->counts().value().views, 200U);
}

TEST_F(AnIndex, SaysWhatIsUnknown) {
  EXPECT_EQ(index_->view("nothing").error().code, ErrorCode::unknown_view);
  EXPECT_EQ(index_->run("nothing").error().code, ErrorCode::unknown_run);
  EXPECT_THAT(index_->views_of_run("nothing").value(), IsEmpty());
}

TEST_F(AnIndex, SumsUpARun) {
  ViewRecord one = view_record("a.h5", 60, 30), two = view_record("b.h5", 120, 40);
  two.velocity_m_s = 171.0;
  two.temperature_k.reset();
  add(one);
  add(two);

  const RunRecord run = index_->run("m05-tunnel").value();

  EXPECT_EQ(run.name, "M05 tunnel");
  EXPECT_EQ(run.campaign, "wall-dome");
  EXPECT_EQ(run.campaign_name, "Wall Dome");
  EXPECT_EQ(run.source, "tunnel");
  EXPECT_EQ(run.views, 2U);
  EXPECT_EQ(run.azimuth_low_deg, 60);
  EXPECT_EQ(run.azimuth_high_deg, 120);
  EXPECT_EQ(run.elevation_high_deg, 40);
  EXPECT_EQ(run.mach, 0.5);
  EXPECT_EQ(run.velocity_m_s, std::nullopt);   // the views differ
  EXPECT_EQ(run.temperature_k, std::nullopt);  // one of them does not say
}

TEST_F(AnIndex, ListsRunsAndCampaignsPageByPage) {
  for (const char* run : {"c", "a", "b"}) {
    ViewRecord view = view_record(std::string(run) + ".h5");
    view.run_name = run;
    view.source = run == std::string("b") ? "flight" : "tunnel";
    add(view);
  }
  const auto first = index_->runs({}, 2, 0).value(), second = index_->runs({}, 2, 2).value();

  EXPECT_THAT(first.items,
              ElementsAre(testing::Field(&RunRecord::id, "a"), testing::Field(&RunRecord::id, "b")));
  EXPECT_TRUE(first.more);
  EXPECT_THAT(second.items, ElementsAre(testing::Field(&RunRecord::id, "c")));
  EXPECT_FALSE(second.more);
  EXPECT_EQ(index_->runs({.source = "flight"}, 10, 0).value().items.size(), 1U);
  EXPECT_EQ(index_->runs({.campaign = "wall-dome"}, 10, 0).value().items.size(), 3U);
  EXPECT_EQ(index_->campaigns(10, 0).value().items.at(0).runs, 3U);
}

// Any filter, against the same question asked of a vector.
TEST_F(AnIndex, FiltersAndSortsAsAVectorWould) {
  std::mt19937 random(11);
  std::vector<ViewRecord> all;
  for (int i = 0; i < 120; ++i) {
    ViewRecord view = view_record(fmt::format("{}.h5", i), static_cast<double>(random() % 12) * 15);
    view.source = random() % 2 ? "tunnel" : "simulation";
    view.run_name = fmt::format("run {}", random() % 3);
    view.mach = random() % 4 ? std::optional(0.1 * static_cast<double>(random() % 8)) : std::nullopt;
    view.frames = random() % 5;
    all.push_back(add(view));
  }
  const auto in = [](std::optional<double> value, const ColumnRange& range) {
    return value && (!range.low || *value >= *range.low) && (!range.high || *value <= *range.high);
  };
  for (int trial = 0; trial < 100; ++trial) {
    SCOPED_TRACE(trial);
    ViewFilter filter{.descending = random() % 2 == 0, .limit = 1000};
    if (random() % 2) filter.source = "tunnel";
    if (random() % 2) filter.run = "run-1";
    if (random() % 2) filter.ranges["azimuth_deg"] = {45.0, 120.0};
    if (random() % 2) filter.ranges["mach"] = {random() % 2 ? std::optional(0.2) : std::nullopt, 0.5};
    filter.sort = std::array{"id", "azimuth_deg", "mach", "frames"}.at(random() % 4);
    auto expected = all;
    std::erase_if(expected, [&](const ViewRecord& view) {
      return (filter.source && view.source != *filter.source) || (filter.run && view.run != *filter.run) ||
             (filter.ranges.contains("azimuth_deg") && !in(view.azimuth_deg, filter.ranges["azimuth_deg"])) ||
             (filter.ranges.contains("mach") && !in(view.mach, filter.ranges["mach"]));
    });
    // SQLite has NULL before every number (its documentation of ORDER BY), as std::optional has.
    std::ranges::sort(expected, [&](const ViewRecord& a, const ViewRecord& b) {
      const auto key = [&](const ViewRecord& view) -> std::optional<double> {
        if (filter.sort == "azimuth_deg") return view.azimuth_deg;
        if (filter.sort == "mach") return view.mach;
        if (filter.sort == "frames") return static_cast<double>(view.frames);
        return std::nullopt;
      };
      if (filter.sort == "id") return filter.descending ? a.id > b.id : a.id < b.id;
      if (key(a) != key(b)) return filter.descending ? key(a) > key(b) : key(a) < key(b);
      return a.id < b.id;
    });

    const auto found = ids(filter);

    ASSERT_EQ(found.size(), expected.size());
    for (std::size_t i = 0; i < found.size(); ++i) ASSERT_EQ(found[i], expected[i].id) << i;

    // Page by page it is the same list.
    std::vector<std::string> paged;
    for (bool more = true; more;) {
      filter.limit = 7;
      filter.offset = paged.size();
      const auto page = index_->views(filter).value();
      for (const auto& view : page.items) paged.push_back(view.id);
      more = page.more;
      ASSERT_LE(paged.size(), found.size());
    }
    EXPECT_EQ(paged, found);
  }
}

TEST_F(AnIndex, TakesColumnsFromAFixedSetOnly) {
  for (const char* column : {"note", "1; DROP TABLE view", "mach--", ""}) {
    EXPECT_EQ(index_->views({.sort = column}).error().code, ErrorCode::bad_parameter) << column;
    EXPECT_EQ(index_->views({.ranges = {{column, {0.0, 1.0}}}}).error().code, ErrorCode::bad_parameter)
        << column;
  }
  add(view_record("a.h5"));
  EXPECT_THAT(ids({.run = "' OR 1=1 --"}), IsEmpty());
}

TEST_F(AnIndex, MarksWhatIsGoneAndWhatIsBack) {
  const std::string id = id_of(view_record("a.h5"));

  ASSERT_TRUE(index_->mark_missing("a.h5"));
  EXPECT_EQ(index_->view(id).value().state, "missing");
  EXPECT_THAT(index_->views_of_run("m05-tunnel").value(), IsEmpty());
  EXPECT_THAT(ids({.state = "missing"}), ElementsAre(id));
  EXPECT_EQ(index_->counts().value().missing, 1U);

  ASSERT_TRUE(index_->mark_present("a.h5"));
  EXPECT_EQ(index_->view(id).value().state, "ready");
  EXPECT_EQ(index_->views_of_run("m05-tunnel").value().size(), 1U);
}

TEST_F(AnIndex, SaysWhyAFileIsRefusedUntilItIsIndexed) {
  const std::string id = id_of(view_record("a.h5"));
  RefusalRecord refusal{
      .path = "a.h5", .code = "damaged-file", .text = "torn", .refused_at_ms = 5, .stamp = {1, 2, 3}};

  ASSERT_TRUE(index_->put_refusal(refusal));

  const auto refusals = index_->refusals(10, 0).value();
  ASSERT_EQ(refusals.items.size(), 1U);
  EXPECT_EQ(refusals.items[0].code, "damaged-file");
  EXPECT_EQ(refusals.items[0].text, "torn");
  EXPECT_EQ(refusals.items[0].refused_at_ms, 5);
  EXPECT_EQ(index_->view(id).value().state, "missing");  // what it was of is no longer there
  const auto known = index_->known_files().value();
  ASSERT_EQ(known.size(), 1U);
  EXPECT_EQ(known[0].state, "refused");
  EXPECT_EQ(known[0].stamp, refusal.stamp);

  add(view_record("a.h5"));
  EXPECT_THAT(index_->refusals(10, 0).value().items, IsEmpty());
  EXPECT_EQ(index_->view(id).value().state, "ready");
}

TEST_F(AnIndex, KnowsItsFiles) {
  const ViewRecord kept = add(view_record("a.h5"));

  const auto known = index_->known_files().value();

  ASSERT_EQ(known.size(), 1U);
  EXPECT_EQ(known[0].path, "a.h5");
  EXPECT_EQ(known[0].stamp, kept.stamp);
  EXPECT_EQ(known[0].state, "ready");
  EXPECT_EQ(known[0].folder, kept.folder);
  EXPECT_THAT(index_->folders().value(), ElementsAre(kept.folder));

  ASSERT_TRUE(index_->read_again(kept.id));
  EXPECT_NE(index_->known_files().value()[0].stamp, kept.stamp);
}

TEST_F(AnIndex, CountsItsChangesAndOnlyThose) {
  const RefusalRecord refusal{.path = "b.h5", .code = "not-hdf5", .text = "no"};
  std::uint64_t last = revision();
  const auto risen = [&] {
    const std::uint64_t before = std::exchange(last, revision());
    return last > before;
  };

  add(view_record("a.h5"));
  EXPECT_TRUE(risen());
  add(view_record("a.h5"));
  EXPECT_TRUE(risen());
  ASSERT_TRUE(index_->mark_present("a.h5"));
  EXPECT_FALSE(risen());
  ASSERT_TRUE(index_->mark_missing("a.h5"));
  EXPECT_TRUE(risen());
  ASSERT_TRUE(index_->mark_missing("a.h5"));
  EXPECT_FALSE(risen());
  ASSERT_TRUE(index_->put_refusal(refusal));
  EXPECT_TRUE(risen());
  ASSERT_TRUE(index_->put_refusal(refusal));
  EXPECT_FALSE(risen());
  ASSERT_TRUE(index_->mark_missing("b.h5"));
  EXPECT_TRUE(risen());
  static_cast<void>(ids({}));
  EXPECT_FALSE(risen());
}

TEST_F(AnIndex, CountsWhatItHolds) {
  add(view_record("a.h5"));
  ViewRecord other = view_record("b.h5");
  other.run_name = "other";
  add(other);
  ASSERT_TRUE(index_->put_refusal({.path = "c.h5", .code = "not-hdf5", .text = "no"}));

  const IndexCounts counts = index_->counts().value();

  EXPECT_EQ(counts.campaigns, 1U);
  EXPECT_EQ(counts.runs, 2U);
  EXPECT_EQ(counts.views, 2U);
  EXPECT_EQ(counts.refusals, 1U);
  EXPECT_EQ(counts.frames, 2000U);
  EXPECT_EQ(counts.bytes, 32'000'000U);
}

TEST_F(AnIndex, KeepsASecondWriterOutAndNamesTheFirst) {
  for (int attempt = 0; attempt < 2; ++attempt) {
    const auto second = Index::open_for_writing(state_);

    ASSERT_FALSE(second);
    EXPECT_EQ(second.error().code, ErrorCode::state_locked);
    EXPECT_THAT(second.error().text, HasSubstr(fmt::format("process {} ", ::getpid())));
  }
  EXPECT_TRUE(index_->upsert_view(view_record("a.h5")));  // the first is none the worse

  index_.reset();
  EXPECT_TRUE(Index::open_for_writing(state_));
}

TEST_F(AnIndex, IsReadBesideItsWriter) {
  const auto reader = Index::open_for_reading(state_).value();
  const std::string id = id_of(view_record("a.h5"));

  EXPECT_EQ(reader->view(id).value().path, "a.h5");
  EXPECT_EQ(reader->upsert_view(view_record("b.h5")).error().code, ErrorCode::internal);
}

TEST_F(AnIndex, AnswersManyThreadsWhileItIsWritten) {
  std::atomic<bool> over{false};
  std::atomic<int> answers{0}, failures{0};
  std::vector<std::jthread> readers;
  for (int i = 0; i < 4; ++i) {
    readers.emplace_back([&] {
      while (!over) {
        const auto counts = index_->counts();
        const auto page = index_->views({.limit = 500});
        // A view is there with its revision or not at all.
        if (!counts || !page || counts->revision < counts->views) ++failures;
        ++answers;
      }
    });
  }
  for (int i = 0; i < 60; ++i) add(view_record(fmt::format("{}.h5", i)));
  while (answers < 20 && failures == 0) std::this_thread::yield();
  over = true;
  readers.clear();

  EXPECT_EQ(failures, 0);
}

TEST(Index, IsNotReadBeforeItIsMade) {
  const test::TemporaryFolder folder;

  EXPECT_EQ(Index::open_for_reading(folder.path()).error().code, ErrorCode::not_indexed);
}

TEST(Index, OfANewerProgramIsRefusedByName) {
  const test::TemporaryFolder folder;
  { ASSERT_TRUE(Index::open_for_writing(folder.path())); }
  {
    ASSERT_TRUE(
        Connection::open(folder.path() / "index.sqlite", true).value()->execute("PRAGMA user_version = 999"));
  }

  EXPECT_EQ(Index::open_for_writing(folder.path()).error().code, ErrorCode::newer_state);
  EXPECT_EQ(Index::open_for_reading(folder.path()).error().code, ErrorCode::newer_state);
}

TEST(Index, OfAnOlderProgramIsBroughtUpToDateByAWriter) {
  const test::TemporaryFolder folder;
  { ASSERT_TRUE(Connection::open(folder.path() / "index.sqlite", true)); }

  EXPECT_EQ(Index::open_for_reading(folder.path()).error().code, ErrorCode::not_indexed);
  EXPECT_TRUE(Index::open_for_writing(folder.path()));
  EXPECT_TRUE(Index::open_for_reading(folder.path()));
}

TEST(Index, ThatIsNoDatabaseIsDamaged) {
  const test::TemporaryFolder folder;
  std::ofstream(folder.path() / "index.sqlite") << std::string(8192, 'x');

  EXPECT_EQ(Index::open_for_writing(folder.path()).error().code, ErrorCode::damaged_state);
  EXPECT_EQ(Index::open_for_reading(folder.path()).error().code, ErrorCode::damaged_state);
}

/// Writes one view in a process of its own, which is killed while it has the index open.
void write_and_die(const fs::path& state) {
  const pid_t child = ::fork();
  if (child == 0) {
    auto index = Index::open_for_writing(state);
    if (index) static_cast<void>((*index)->upsert_view(view_record("a.h5")));
    ::kill(::getpid(), SIGKILL);
  }
  int status = 0;
  ::waitpid(child, &status, 0);
}

TEST(Index, SurvivesItsWriterBeingKilled) {
  const test::TemporaryFolder folder;
  write_and_die(folder.path());

  const auto index = Index::open_for_writing(folder.path());

  ASSERT_TRUE(index) << index.error().text;
  EXPECT_TRUE((*index)->was_left_uncleanly());
  EXPECT_EQ((*index)->view("m05-tunnel-az090-el30").value().path, "a.h5");
}

TEST(Index, IsLeftCleanlyByAWriterThatEnds) {
  const test::TemporaryFolder folder;
  { EXPECT_FALSE(Index::open_for_writing(folder.path()).value()->was_left_uncleanly()); }

  EXPECT_FALSE(Index::open_for_writing(folder.path()).value()->was_left_uncleanly());
}

TEST(Index, IsCheckedAfterAnUncleanStop) {
  const test::TemporaryFolder folder;
  write_and_die(folder.path());
  { ASSERT_TRUE(Index::open_for_writing(folder.path())); }  // takes the log into the file
  std::ofstream(folder.path() / "lock") << "12345";
  // The root page of a table or an index, but for its first bytes.
  std::fstream stream(folder.path() / "index.sqlite", std::ios::in | std::ios::out | std::ios::binary);
  stream.seekp(4096 + 8);
  stream << std::string(1000, '\xEE');
  stream.close();

  for (int attempt = 0; attempt < 2; ++attempt) {
    const auto index = Index::open_for_writing(folder.path());

    ASSERT_FALSE(index);
    EXPECT_EQ(index.error().code, ErrorCode::damaged_state);
  }
}

}  // namespace
}  // namespace bentlight::index
