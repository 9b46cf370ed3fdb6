// The demo archive as others see it: by NumPy and the HDF5 command-line tools.
#include "demo/demo_archive.h"

#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <unistd.h>

#include <filesystem>
#include <fstream>
#include <map>
#include <nlohmann/json.hpp>
#include <string>
#include <vector>

#include "support/command.h"

namespace bentlight::demo {
namespace {

namespace fs = std::filesystem;
using testing::HasSubstr;
using testing::Not;
using testing_support::Finished;
using testing_support::run;

constexpr DemoOptions small = {.views_per_run = 6, .frames = 1024, .grid = 24, .seed = 11};
constexpr DemoOptions tiny = {.views_per_run = 2, .frames = 64, .grid = 8, .seed = 11};

std::string text_of(const fs::path& path) {
  std::ifstream file(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(file), {}};
}

/// Every file below a folder, by its relative path.
std::map<std::string, std::string> contents(const fs::path& folder) {
  std::map<std::string, std::string> files;
  for (const auto& entry : fs::recursive_directory_iterator(folder)) {
    if (entry.is_regular_file()) files[fs::relative(entry.path(), folder).string()] = text_of(entry.path());
  }
  return files;
}

class DemoArchive : public testing::Test {
 protected:
  void SetUp() override {
    root_ = fs::temp_directory_path() / fmt::format("bentlight-demo-{}", ::getpid());
    fs::create_directories(root_);
  }
  void TearDown() override { fs::remove_all(root_); }

  fs::path folder(const std::string& name = "archive") const { return root_ / name; }

  Expected<DemoReport> write(const DemoOptions& options,
                             const std::string& name = "archive",
                             std::size_t threads = 1) {
    WorkPool pool(threads);
    return write_demo_archive(folder(name), options, pool);
  }

  Finished checked_by_numpy(const std::string& name = "archive") const {
    return run(fmt::format("/usr/bin/python3 {}/tests/reference/demo_reference.py {}", BENTLIGHT_SOURCE,
                           folder(name).string()));
  }

  fs::path root_;
};

TEST_F(DemoArchive, AgreesWithItsKnownAnswersInNumPy) {
  ASSERT_TRUE(write(small));

  const Finished check = checked_by_numpy();

  EXPECT_EQ(check.status, 0) << check.output;
  EXPECT_THAT(check.output, HasSubstr("convective speed"));
  EXPECT_THAT(check.output, HasSubstr("0 checks failed"));
}

// The check above can fail: each falsified answer is found, and by the right name.
TEST_F(DemoArchive, AFalsifiedAnswerIsFound) {
  ASSERT_TRUE(write(small));
  auto answers = nlohmann::json::parse(text_of(folder() / "known_answers.json"));
  answers["random_wavefront"]["convective_speed_m_s"] =
      1.15 * answers["random_wavefront"]["convective_speed_m_s"].get<double>();
  answers["roll_up"]["strouhal"] = 3.2;
  answers["signals"]["surface_pressure"]["lead_frames"] = 13;
  answers["tunnel"]["sensor_noise_m"] = 13e-9;
  answers["tunnel"]["vibration_hz"] = 520.0;
  answers["views"][0]["expected"]["opd_rms_overall_m"] =
      2.0 * answers["views"][0]["expected"]["opd_rms_overall_m"].get<double>();
  answers["views"][2]["flaws"]["gaps"][0]["missing_frames"] = 6;
  answers["views"][6]["flaws"]["nan_frames"][0] = 3;
  std::ofstream(folder() / "known_answers.json") << answers;

  const Finished check = checked_by_numpy();

  EXPECT_NE(check.status, 0);
  for (const char* name :
       {"convective speed", "peak of the wavefront's spectrum", "lead of the surface pressure",
        "sensor noise", "vibration line", "OPD_rms overall", "gaps", "NaN frames"}) {
    EXPECT_THAT(check.output, testing::ContainsRegex(fmt::format("FAILS [^\n]*{}", name))) << name;
  }
}

TEST_F(DemoArchive, EqualOptionsGiveEqualBytesWhateverTheThreads) {
  DemoOptions options = tiny;
  options.views_per_run = 7;  // every kind of storage and flaw

  ASSERT_TRUE(write(options, "alone", 0));
  ASSERT_TRUE(write(options, "many", 3));
  options.seed = 12;
  ASSERT_TRUE(write(options, "other"));

  const auto alone = contents(folder("alone")), many = contents(folder("many")),
             other = contents(folder("other"));
  EXPECT_EQ(alone.size(), 2U * 7U + 2U);
  EXPECT_EQ(alone, many);
  for (const auto& [name, bytes] : alone) EXPECT_NE(bytes, other.at(name)) << name;
}

TEST_F(DemoArchive, StorageIsAsAsked) {
  const auto kept = [&](DemoStorage storage) {
    DemoOptions options = tiny;
    options.storage = storage;
    EXPECT_TRUE(write(options));
    return run(fmt::format("h5dump -H -p -d /opd {0}/wall-dome/tunnel-m045/*.h5 {0}/wall-dome/les-m045/*.h5",
                           folder().string()))
        .output;
  };

  EXPECT_THAT(kept(DemoStorage::contiguous),
              testing::AllOf(HasSubstr("CONTIGUOUS"), Not(HasSubstr("CHUNKED"))));
  EXPECT_THAT(kept(DemoStorage::chunked),
              testing::AllOf(HasSubstr("CHUNKED"), Not(HasSubstr("CONTIGUOUS")), Not(HasSubstr("DEFLATE"))));
  EXPECT_THAT(kept(DemoStorage::deflate),
              testing::AllOf(HasSubstr("CHUNKED"), HasSubstr("DEFLATE { LEVEL 1 }"), HasSubstr("SHUFFLE"),
                             Not(HasSubstr("CONTIGUOUS"))));
  EXPECT_THAT(kept(DemoStorage::mixed), testing::AllOf(HasSubstr("CONTIGUOUS"), HasSubstr("DEFLATE")));
}

TEST_F(DemoArchive, AFolderWithSomethingElseIsLeftAlone) {
  fs::create_directories(folder());
  std::ofstream(folder() / "thesis.txt") << "irreplaceable";
  std::ofstream(folder() / "known_answers.json") << R"({"generator": 7, "views": [{"file": "thesis.txt"}]})";
  const auto before = contents(folder());

  const auto report = write(tiny);

  ASSERT_FALSE(report);
  EXPECT_EQ(report.error().code, ErrorCode::bad_option);
  EXPECT_THAT(report.error().text, HasSubstr("not empty"));
  EXPECT_EQ(contents(folder()), before);
}

TEST_F(DemoArchive, AnEarlierArchiveIsReplacedAndNothingElse) {
  DemoOptions larger = tiny;
  larger.views_per_run = 5;
  ASSERT_TRUE(write(larger));
  std::ofstream(folder() / "wall-dome" / "mine.h5") << "irreplaceable";
  auto answers = nlohmann::json::parse(text_of(folder() / "known_answers.json"));
  std::ofstream(root_ / "outside.h5") << "irreplaceable";
  answers["views"].push_back({{"file", "wall-dome/../../outside.h5"}});
  answers["views"].push_back({{"file", "../outside.h5"}});
  std::ofstream(folder() / "known_answers.json") << answers;

  ASSERT_TRUE(write(tiny));

  auto files = contents(folder());
  EXPECT_EQ(files.at("wall-dome/mine.h5"), "irreplaceable");
  EXPECT_EQ(text_of(root_ / "outside.h5"), "irreplaceable");
  files.erase("wall-dome/mine.h5");
  ASSERT_TRUE(write(tiny, "fresh"));
  EXPECT_EQ(files, contents(folder("fresh")));
}

TEST_F(DemoArchive, TooLittleRoomIsSaidBeforeAnythingIsWritten) {
  const auto report = write({.views_per_run = 2000, .frames = 10'000'000, .grid = 512});

  ASSERT_FALSE(report);
  EXPECT_EQ(report.error().code, ErrorCode::disk_full);
  EXPECT_THAT(report.error().text,
              HasSubstr("42781900.80 GB"));  // 2 * 2000 * 1e7 * 512^2 * 4 bytes, and 2 % of it
  EXPECT_TRUE(fs::is_empty(folder()));
}

TEST_F(DemoArchive, OptionsOutOfRangeAreNamedWithTheirRange) {
  const auto refused = [&](const DemoOptions& options) {
    const auto report = write(options);
    EXPECT_FALSE(report);
    EXPECT_FALSE(fs::exists(folder()));
    return report ? std::string() : report.error().text;
  };

  EXPECT_EQ(refused({.views_per_run = 0}), "--views is 0; it goes from 1 to 2000");
  EXPECT_EQ(refused({.frames = 63}), "--frames is 63; it goes from 64 to 10000000");
  EXPECT_EQ(refused({.grid = 513}), "--grid is 513; it goes from 8 to 512");
}

TEST_F(DemoArchive, ACancelledArchiveHoldsOnlyWholeFilesAndCanBeWrittenAnew) {
  std::stop_source source;
  WorkPool pool(1);

  const auto report = write_demo_archive(
      folder(), tiny, pool,
      [&](const DemoProgress& progress) {
        if (progress.files_done == 1) source.request_stop();
      },
      source.get_token());

  ASSERT_FALSE(report);
  EXPECT_EQ(report.error().code, ErrorCode::cancelled);
  for (const auto& [name, bytes] : contents(folder())) EXPECT_THAT(name, Not(HasSubstr(".part")));
  EXPECT_LT(contents(folder()).size(), 2U * 2U + 2U);
  ASSERT_TRUE(write(tiny));
  ASSERT_TRUE(write(tiny, "fresh"));
  EXPECT_EQ(contents(folder()), contents(folder("fresh")));
}

TEST_F(DemoArchive, ProgressRisesToTheWhole) {
  std::vector<DemoProgress> told;
  WorkPool pool(2);

  const auto report = write_demo_archive(folder(), tiny, pool,
                                         [&](const DemoProgress& progress) { told.push_back(progress); });

  ASSERT_TRUE(report);
  EXPECT_EQ(report->frame_bytes, 2U * 2U * 64U * 8U * 8U * 4U);
  ASSERT_FALSE(told.empty());
  for (std::size_t i = 1; i < told.size(); ++i) {
    EXPECT_GE(told[i].bytes_done, told[i - 1].bytes_done);
    EXPECT_GE(told[i].files_done, told[i - 1].files_done);
  }
  EXPECT_EQ(told.back().bytes_done, report->frame_bytes);
  EXPECT_EQ(told.back().bytes_total, report->frame_bytes);
  EXPECT_EQ(told.back().files_done, 4U);
  EXPECT_EQ(told.back().files_total, 4U);
}

}  // namespace
}  // namespace bentlight::demo
