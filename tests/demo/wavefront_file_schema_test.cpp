// schema/wavefront_file.schema.json and the page beside it, held against the files of the demo archive.
#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <unistd.h>

#include <filesystem>
#include <fstream>
#include <iterator>
#include <string>

#include "demo/demo_archive.h"
#include "support/command.h"

namespace bentlight::demo {
namespace {

namespace fs = std::filesystem;
using testing_support::Finished;
using testing_support::run;

class WavefrontFileSchema : public testing::Test {
 protected:
  void SetUp() override {
    folder_ = fs::temp_directory_path() / fmt::format("bentlight-schema-{}", ::getpid());
    WorkPool pool(1);
    ASSERT_TRUE(write_demo_archive(folder_, {.views_per_run = 1, .frames = 64, .grid = 8}, pool));
  }
  void TearDown() override { fs::remove_all(folder_); }

  Finished validated(const std::string& files) const {
    return run(
        fmt::format("/usr/bin/python3 {0}/tests/reference/wavefront_file_schema.py "
                    "{0}/schema/wavefront_file.schema.json {0}/schema/wavefront_file.md {1}",
                    BENTLIGHT_SOURCE, files));
  }

  fs::path folder_;
};

TEST_F(WavefrontFileSchema, HoldsForBothKindsOfDemoFile) {
  const Finished check = validated(fmt::format("{}/wall-dome/*/*.h5", folder_.string()));

  EXPECT_EQ(check.status, 0) << check.output;
  EXPECT_THAT(check.output, testing::ContainsRegex("tunnel-m045/[^\n]*conforms"));
  EXPECT_THAT(check.output, testing::ContainsRegex("les-m045/[^\n]*conforms"));
}

TEST_F(WavefrontFileSchema, FindsWhatIsWrongWithAFile) {
  const auto file = folder_ / "wall-dome" / "les-m045" / "az092.5_el37.5.h5";
  ASSERT_TRUE(fs::exists(file));
  const auto script = folder_ / "spoil.py";
  std::ofstream(script) << "import h5py, sys\n"
                           "f = h5py.File(sys.argv[1], 'r+')\n"
                           "f['opd'].attrs['unit'] = 'furlong'\n"
                           "del f.attrs['campaign'], f.attrs['frame_rate_hz']\n"
                           "f.attrs['density_kg_m3'] = 0.0\n";
  ASSERT_EQ(run(fmt::format("/usr/bin/python3 {} {}", script.string(), file.string())).status, 0);

  const Finished check = validated(file.string());

  EXPECT_NE(check.status, 0);
  for (const char* problem : {"'furlong' is none of", "campaign is missing",
                              "density_kg_m3: 0.0 is not above 0", "none of the alternatives holds"}) {
    EXPECT_THAT(check.output, testing::HasSubstr(problem));
  }
}

// The page's own example of writing a file makes one that conforms.
TEST_F(WavefrontFileSchema, HoldsForTheFileThatThePageWrites) {
  std::ifstream file(fmt::format("{}/schema/wavefront_file.md", BENTLIGHT_SOURCE));
  const std::string page{std::istreambuf_iterator<char>(file), {}};
  const auto start = page.find("import h5py, numpy");
  ASSERT_NE(start, std::string::npos);
  std::ofstream(folder_ / "write.py") << page.substr(start, page.find("```", start) - start);
  const Finished written = run(fmt::format("cd {} && /usr/bin/python3 write.py", folder_.string()));
  ASSERT_EQ(written.status, 0) << written.output;

  const Finished check = validated((folder_ / "az060_el30.h5").string());

  EXPECT_EQ(check.status, 0) << check.output;
}

}  // namespace
}  // namespace bentlight::demo
