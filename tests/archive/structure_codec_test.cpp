#include "archive/structure_codec.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <cstring>
#include <limits>
#include <random>

#include "archive/probe_protocol.h"
#include "support/sample_wavefront_file.h"

namespace bentlight::archive {
namespace {

TEST(StructureCodec, PutsTogetherWhatItTookApart) {
  const WavefrontFile file = test::sample_wavefront_file();

  const TakenApart parts = take_apart(file);
  const auto again = put_together(nlohmann::json::parse(parts.facts.dump()), parts.arrays);

  ASSERT_TRUE(again) << again.error().text;
  test::expect_same(*again, file);
}

TEST(StructureCodec, MissesEveryPartByItself) {
  const TakenApart whole = take_apart(test::sample_wavefront_file());

  for (const auto& [key, value] : whole.facts.items()) {
    TakenApart parts = whole;
    parts.facts.erase(key);
    EXPECT_EQ(put_together(parts.facts, parts.arrays).error().code, ErrorCode::damaged_state) << key;
    parts.facts[key] = "another type";
    EXPECT_FALSE(put_together(parts.facts, parts.arrays) && key != "dataset") << key;
  }
  for (std::size_t i = 0; i < whole.arrays.size(); ++i) {
    TakenApart parts = whole;
    parts.arrays.erase(parts.arrays.begin() + static_cast<std::ptrdiff_t>(i));
    EXPECT_EQ(put_together(parts.facts, parts.arrays).error().code, ErrorCode::damaged_state);
    parts = whole;
    parts.arrays[i].bytes.pop_back();
    EXPECT_EQ(put_together(parts.facts, parts.arrays).error().code, ErrorCode::damaged_state);
    parts = whole;
    parts.arrays[i].shape = {SIZE_MAX, SIZE_MAX};
    EXPECT_EQ(put_together(parts.facts, parts.arrays).error().code, ErrorCode::damaged_state);
  }
}

TEST(StructureCodec, KeepsALayout) {
  Layout layout{
      .dataset = "/a/\"b\"", .axes = {2, 1, 0}, .unit = "nm", .scale = 0.1, .offset = -3.0, .sign = -1};

  const auto again = layout_from_json(nlohmann::json::parse(to_json(layout).dump()));
  const auto plain = layout_from_json(to_json(Layout{}));

  ASSERT_TRUE(again);
  EXPECT_EQ(to_json(*again), to_json(layout));
  EXPECT_EQ(again->axes, layout.axes);
  EXPECT_EQ(again->sign, -1);
  ASSERT_TRUE(plain);
  EXPECT_FALSE(plain->unit);
  EXPECT_FALSE(layout_from_json(nlohmann::json::array()));
}

TEST(ProbeProtocol, CarriesAStructureAndErrors) {
  const WavefrontFile file = test::sample_wavefront_file();

  const auto again = structure_from_reply(structure_reply(file));
  const auto refused =
      structure_from_reply(error_reply({ErrorCode::unsafe_file, "leads \"away\" \xff", "/opd"}));

  ASSERT_TRUE(again) << again.error().text;
  test::expect_same(*again, file);
  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().code, ErrorCode::unsafe_file);
  EXPECT_EQ(refused.error().text, "leads \"away\" \uFFFD");
  EXPECT_EQ(refused.error().subject, "/opd");
}

// A reply may come from a process that a hostile file has taken over.
TEST(ProbeProtocol, SurvivesMutatedReplies) {
  const std::vector<std::byte> sound = structure_reply(test::sample_wavefront_file());

  std::size_t refused = 0;
  for (std::uint64_t seed = 0; seed < 20'000; ++seed) {
    std::mt19937_64 random(seed);
    std::vector<std::byte> reply = sound;
    for (std::uint64_t i = 0; i < 1 + random() % 4; ++i)
      reply[random() % reply.size()] = static_cast<std::byte>(random() & 0xff);
    if (random() % 4 == 0) reply.resize(random() % reply.size());

    const auto file = structure_from_reply(reply);
    if (!file) {
      ++refused;
      ASSERT_FALSE(file.error().text.empty() && file.error().code == ErrorCode::damaged_state) << seed;
    }
  }

  EXPECT_GT(refused, 1000);
}

}  // namespace
}  // namespace bentlight::archive
