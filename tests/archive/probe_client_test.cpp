#include "archive/probe_client.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <sys/stat.h>

#include <chrono>
#include <fstream>
#include <iterator>
#include <nlohmann/json.hpp>
#include <random>

#include "archive/frame_reader.h"
#include "support/npy_values.h"
#include "support/wavefront_files.h"

namespace bentlight::archive {
namespace {

using test::Specimen;
using test::WavefrontFiles;
using testing::HasSubstr;

const PosixFileSystem files;
const ProbeClient probe(BENTLIGHT_PROBE);

WavefrontFile structure(const WavefrontFiles& made, const std::string& name) {
  return probe.read_structure(files, made.folder() / (name + ".h5"), Layout{}).value();
}

TEST(ProbeClient, RefusesWhatItCannotReadAndSaysWhy) {
  const WavefrontFiles made;

  std::size_t refused = 0;
  for (const Specimen& specimen : made.all()) {
    if (specimen.refused.empty()) continue;
    SCOPED_TRACE(specimen.name);
    const auto file = probe.read_structure(files, specimen.path, specimen.layout);
    ASSERT_FALSE(file);
    EXPECT_EQ(name(file.error().code), specimen.refused) << file.error().text;
    EXPECT_THAT(file.error().text, HasSubstr(specimen.says));
    EXPECT_EQ(file.error().subject, specimen.path.string());
    ++refused;
  }

  EXPECT_GT(refused, 45);
}

TEST(ProbeClient, ReadsTimesCoordinatesAndSignals) {
  const WavefrontFiles made({"surroundings"});

  const WavefrontFile file = structure(made, "surroundings");

  ASSERT_EQ(file.time_s.size(), 23);
  EXPECT_DOUBLE_EQ(file.time_s[22], 3.0 + 22 / 20e3);
  // A step is the difference of two times near 3 s, each rounded to 2^-51 s: 2e-11 of a step of 5e-5 s.
  EXPECT_NEAR(file.frame_rate_hz, 20e3, 20e3 * 2e-11);
  EXPECT_DOUBLE_EQ(file.grid.x_m.front(), -0.1);
  EXPECT_DOUBLE_EQ(file.grid.x_m.back(), 0.1);
  EXPECT_NEAR(file.grid.y_m.back(), 0.12, 1e-12);
  EXPECT_FALSE(file.has_mask);
  // Whole numbers, another length and a folder are no signals.
  ASSERT_EQ(file.signals.size(), 2);
  EXPECT_EQ(file.signals[0].name, "accelerometer");
  EXPECT_EQ(file.signals[1].name, "pressure");
  EXPECT_EQ(file.signals[1].unit, "Pa");
  const auto pressure = test::load_npy(made.folder() / "surroundings_pressure.npy").values;
  EXPECT_EQ(std::vector<double>(file.signals[1].values.begin(), file.signals[1].values.end()), pressure);
}

TEST(ProbeClient, ReadsConditionsInWhateverFormTheyWereWritten) {
  const WavefrontFiles made({"worded", "type_le_f4_plain"});

  const WavefrontFile file = structure(made, "worded");

  EXPECT_EQ(file.conditions.campaign, "fixed");
  EXPECT_EQ(file.conditions.run, "12");
  EXPECT_EQ(file.conditions.source, "flight");
  EXPECT_EQ(file.conditions.note, "only one");
  EXPECT_EQ(file.conditions.azimuth_deg, -45.0);
  EXPECT_EQ(file.conditions.elevation_deg, 12.5);
  EXPECT_EQ(file.conditions.mach, static_cast<double>(0.7F));  // the dataset's goes before the file's
  EXPECT_EQ(file.frame_rate_hz, 12500.0);
  EXPECT_FALSE(file.conditions.wavelength_m);  // NaN is not known
  EXPECT_FALSE(file.conditions.density_kg_m3);
  // Without coordinates: 0.2 m across the longer side, 12 rows, centered.
  EXPECT_NEAR(file.grid.y_m.front(), -0.2 / 12 * 5.5, 1e-15);
  EXPECT_NEAR(file.grid.x_m.back(), 0.2 / 12 * 4.5, 1e-15);
}

TEST(ProbeClient, ReadsTimesInOtherUnits) {
  const WavefrontFiles made({"milliseconds"});

  EXPECT_NEAR(structure(made, "milliseconds").frame_rate_hz, 2000.0, 1e-9);
}

TEST(ProbeClient, ReadsAMaskOfAnyKindOfNumber) {
  const WavefrontFiles made({"mask_uint8", "mask_int64", "mask_bool"});

  for (const Specimen& specimen : made.all()) {
    SCOPED_TRACE(specimen.name);
    const WavefrontFile file = structure(made, specimen.name);
    EXPECT_TRUE(file.has_mask);
    std::vector<std::uint8_t> expected(120, 1);
    for (const std::size_t dark : {0, 1, 2, 119}) expected[dark] = 0;
    EXPECT_EQ(file.grid.mask, expected);
  }
}

TEST(ProbeClient, GivesOneIdentityToOneStateOfAFile) {
  const WavefrontFiles made({"chunk_latest_5x7x4_all", "chunk_earliest_5x7x4_all"});

  const FileIdentity identity = structure(made, "chunk_latest_5x7x4_all").identity;

  EXPECT_EQ(identity.metadata_digest.size(), 64);
  EXPECT_EQ(structure(made, "chunk_latest_5x7x4_all").identity, identity);
  EXPECT_NE(structure(made, "chunk_earliest_5x7x4_all").identity.metadata_digest, identity.metadata_digest);
  EXPECT_EQ(identity.stamp, files.stamp(made.folder() / "chunk_latest_5x7x4_all.h5").value());
}

TEST(ProbeClient, FindsAChangeOfMetadataThatStampsDoNotShow) {
  const WavefrontFiles made({"worded"});
  const auto path = made.all()[0].path;
  const FileIdentity before = structure(made, "worded").identity;

  ASSERT_EQ(std::system(("/usr/bin/python3 -c \"import h5py; f = h5py.File('" + path.string() +
                         "', 'r+'); f.attrs.modify('azimuth_deg', 44)\"")
                            .c_str()),
            0);

  EXPECT_NE(structure(made, "worded").identity.metadata_digest, before.metadata_digest);
}

TEST(ProbeClient, DescribesTheWholeTree) {
  const WavefrontFiles made({"surroundings", "hidden_external_link", "chunk_earliest_8x12x10_both"});

  const auto text = probe.describe(files, made.folder() / "surroundings.h5");
  ASSERT_TRUE(text) << text.error().text;
  const auto tree = nlohmann::json::parse(*text);
  const auto links = probe.describe(files, made.folder() / "hidden_external_link.h5");
  const auto chunks = probe.describe(files, made.folder() / "chunk_earliest_8x12x10_both.h5");

  std::map<std::string, nlohmann::json> by_path;
  for (const auto& object : tree.at("objects")) by_path[object.at("path")] = object;
  EXPECT_EQ(by_path.at("/").at("attributes").at("run"), "m05");
  EXPECT_EQ(by_path.at("/opd").at("shape"), (std::vector<int>{23, 12, 10}));
  EXPECT_EQ(by_path.at("/opd").at("type"), "float64");
  EXPECT_EQ(by_path.at("/signals/pressure").at("attributes").at("unit"), "Pa");
  EXPECT_EQ(by_path.at("/signals/folder").at("kind"), "group");
  ASSERT_TRUE(links);  // looked at, not followed
  EXPECT_THAT(*links, HasSubstr("/etc/passwd:/ (in another file)"));
  ASSERT_TRUE(chunks);
  const auto opd = nlohmann::json::parse(*chunks).at("objects").at(1);
  EXPECT_EQ(opd.at("filters"), (std::vector<std::string>{"shuffle", "deflate"}));
  EXPECT_EQ(opd.at("chunk"), (std::vector<int>{8, 12, 10}));
}

TEST(ProbeClient, RefusesWhatIsNoFile) {
  const test::TemporaryFolder folder;
  ASSERT_EQ(::mkfifo((folder.path() / "pipe").c_str(), 0600), 0);

  EXPECT_EQ(probe.read_structure(files, folder.path() / "absent.h5", Layout{}).error().code,
            ErrorCode::file_missing);
  EXPECT_EQ(probe.read_structure(files, folder.path(), Layout{}).error().code, ErrorCode::unsafe_file);
  EXPECT_EQ(probe.read_structure(files, folder.path() / "pipe", Layout{}).error().code,
            ErrorCode::unsafe_file);
}

TEST(ProbeClient, SaysWhenTheProbeItselfIsMissing) {
  const WavefrontFiles made({"type_le_f4_plain"});

  const auto file =
      ProbeClient("/nowhere/bentlight-probe").read_structure(files, made.all()[0].path, Layout{});

  ASSERT_FALSE(file);
  EXPECT_EQ(file.error().code, ErrorCode::io_error);
  EXPECT_EQ(file.error().subject, "/nowhere/bentlight-probe");
}

TEST(ProbeClient, RefusesALayoutThatNamesNoAxes) {
  const WavefrontFiles made({"type_le_f4_plain"});
  Layout layout;
  layout.axes = {0, 1, 1};

  EXPECT_EQ(probe.read_structure(files, made.all()[0].path, layout).error().code, ErrorCode::layout_mismatch);
}

TEST(ProbeClient, ReadsAFileThatASwmrWriterHasOpen) {
  const test::TemporaryFolder folder;
  const auto path = folder.path() / "growing.h5";
  // The writer dies without closing: the file's consistency flag stays as a running writer has it.
  const std::string script =
      "import h5py, numpy as np, os; f = h5py.File('" + path.string() +
      "', 'w', libver='latest'); f.attrs['frame_rate_hz'] = 1e4; f.attrs['aperture_diameter_m'] = 0.1; "
      "d = f.create_dataset('opd', (5, 4, 4), 'f4', data=np.arange(80.0).reshape(5, 4, 4), chunks=(1, 4, 4), "
      "maxshape=(None, 4, 4)); d.attrs['unit'] = 'm'; f.swmr_mode = True; d.flush(); os._exit(0)";
  ASSERT_EQ(std::system(("/usr/bin/python3 -c \"" + script + "\"").c_str()), 0);

  const auto file = probe.read_structure(files, path, Layout{});

  ASSERT_TRUE(file) << file.error().text;
  EXPECT_EQ(file->map.frames(), 5);
}

// By H5Dget_chunk_info this took minutes, for it walks the whole index for each chunk.
TEST(ProbeClient, MapsFiftyThousandChunksInSeconds) {
  const test::TemporaryFolder folder;
  const auto path = folder.path() / "many.h5";
  const std::string script =
      "import h5py, numpy as np; f = h5py.File('" + path.string() +
      "', 'w', libver='latest'); f.attrs['frame_rate_hz'] = 1e4; f.attrs['aperture_diameter_m'] = 0.1; "
      "d = f.create_dataset('opd', data=np.ones((50000, 4, 4), 'f4'), chunks=(1, 4, 4)); d.attrs['unit'] = "
      "'m'";
  ASSERT_EQ(std::system(("/usr/bin/python3 -c \"" + script + "\"").c_str()), 0);

  const auto begin = std::chrono::steady_clock::now();
  const auto file = probe.read_structure(files, path, Layout{});
  const auto taken = std::chrono::steady_clock::now() - begin;

  ASSERT_TRUE(file) << file.error().text;
  EXPECT_EQ(file->map.chunks.size(), 50000);
  EXPECT_LT(taken, std::chrono::seconds(5));
}

std::string content_of(const std::filesystem::path& path) {
  std::ifstream stream(path, std::ios::binary);
  return {std::istreambuf_iterator<char>(stream), {}};
}

/// Some bytes changed, most of them where metadata lies; now and then a piece cut out.
std::string mutated(std::string bytes, std::mt19937_64& random) {
  const auto below = [&](std::size_t end) {
    return std::uniform_int_distribution<std::size_t>(0, end - 1)(random);
  };
  for (std::size_t i = 0, changes = 1 + below(12); i < changes; ++i) {
    const std::size_t reach = below(3) == 0 ? bytes.size() : std::min<std::size_t>(bytes.size(), 2500);
    constexpr std::array<unsigned char, 6> extremes{0x00, 0xff, 0x7f, 0x80, 0x01, 0x10};
    const auto value =
        below(2) == 0 ? extremes[below(extremes.size())] : static_cast<unsigned char>(below(256));
    bytes[below(reach)] = static_cast<char>(value);
  }
  if (below(10) == 0) bytes.erase(below(bytes.size()), below(200));
  return bytes;
}

// Nothing worse than a refusal; what is still accepted is read to the end, and may be refused there.
TEST(ProbeClient, SurvivesMutatedFiles) {
  const std::vector<std::string> names{"type_be_f8_plain",       "chunk_earliest_5x7x4_all",
                                       "chunk_latest_5x7x4_all", "surroundings",
                                       "user_block_chunks",      "dark"};
  const WavefrontFiles made(names);
  const auto path = made.folder() / "mutant.h5";

  std::size_t accepted = 0, refused = 0;
  for (std::uint64_t seed = 0; seed < 300; ++seed) {
    SCOPED_TRACE(seed);
    std::mt19937_64 random(seed);
    const auto& origin = made.all()[seed % names.size()];
    std::ofstream(path, std::ios::binary) << mutated(content_of(origin.path), random);

    const auto file = probe.read_structure(files, path, Layout{});
    if (!file) {
      ++refused;
      EXPECT_FALSE(file.error().text.empty());
      EXPECT_NE(file.error().code, ErrorCode::internal) << file.error().text;
      EXPECT_NE(file.error().code, ErrorCode::io_error) << file.error().text;
      continue;
    }
    ++accepted;
    const auto reader = FrameReader::open(files, path, file->map, file->identity);
    const auto aperture = optics::Aperture::of(file->grid);
    if (!reader || !aperture) continue;
    optics::FrameBlock block;
    FrameReader::Scratch scratch;
    (void)reader->read({0, std::min<std::size_t>(reader->frames(), 64)}, *aperture, block, scratch);
  }

  // Both happen, or the mutations are too harsh or too mild to say anything.
  EXPECT_GT(accepted, 20);
  EXPECT_GT(refused, 50);
}

}  // namespace
}  // namespace bentlight::archive
