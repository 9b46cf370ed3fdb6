#include "base/text.h"

#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cmath>
#include <cstring>
#include <fstream>
#include <limits>
#include <random>
#include <regex>

#include "support/command.h"
#include "support/temporary_folder.h"

namespace bentlight {
namespace {

using testing::ElementsAre;

TEST(Slug, KeepsWhatAnAddressCanHold) {
  EXPECT_EQ(slug("Wall dome, M 0.5 (tunnel)"), "wall-dome-m-0.5-tunnel");
  EXPECT_EQ(slug("run_07"), "run_07");
  EXPECT_EQ(slug("  a  //  b  "), "a-b");
  EXPECT_EQ(slug("größe"), "gr-e");
  EXPECT_EQ(slug("光学"), "");
  EXPECT_EQ(slug("-.-"), "");
}

TEST(Slug, OfAnythingIsSafeInAPath) {
  std::mt19937 random(7);
  const std::regex safe("([a-z0-9._][a-z0-9._-]*)?");
  for (int trial = 0; trial < 2000; ++trial) {
    std::string text(random() % 12, ' ');
    for (char& c : text) c = static_cast<char>(random());
    const std::string made = slug(text);
    EXPECT_TRUE(std::regex_match(made, safe)) << made;
    EXPECT_TRUE(made != "." && made != "..") << text;
    EXPECT_EQ(slug(made), made);
  }
}

TEST(Split, KeepsEmptyParts) {
  EXPECT_THAT(split("a,,b,", ','), ElementsAre("a", "", "b", ""));
  EXPECT_THAT(split("", ','), ElementsAre(""));
}

TEST(ParseNumber, TakesTheWholeTextOrNothing) {
  EXPECT_EQ(parse_number("1.5e-3"), 1.5e-3);
  EXPECT_EQ(parse_number("+2"), 2.0);
  EXPECT_EQ(parse_number("-0.25"), -0.25);
  for (const char* bad :
       {"", "+", "-", "1,5", "1.5 ", " 1", "0x10", "1e999", "nan", "inf", "-inf", "1.5m", "--1", "+-1"}) {
    EXPECT_EQ(parse_number(bad), std::nullopt) << bad;
  }
}

TEST(ParseWholeNumber, RefusesFractionsAndOverflow) {
  EXPECT_EQ(parse_whole_number("-12"), -12);
  EXPECT_EQ(parse_whole_number("9223372036854775807"), std::numeric_limits<long long>::max());
  for (const char* bad : {"", "1.0", "1e3", "9223372036854775808", "12a", " 1"}) {
    EXPECT_EQ(parse_whole_number(bad), std::nullopt) << bad;
  }
}

TEST(Shortest, ReadsBackToTheSameDouble) {
  EXPECT_EQ(shortest(0.1), "0.1");
  std::mt19937_64 random(3);
  for (int trial = 0; trial < 10'000; ++trial) {
    const std::uint64_t bits = random();
    double value = 0.0;
    std::memcpy(&value, &bits, sizeof value);
    if (!std::isfinite(value)) continue;
    EXPECT_EQ(parse_number(shortest(value)), value) << shortest(value);
  }
}

// Python's parser is the judge; what is no UTF-8 must have become U+FFFD (as the Unicode standard advises).
TEST(JsonQuoted, IsJsonThatReadsBackToTheSameText) {
  const test::TemporaryFolder folder;
  const std::vector<std::string> good = {
      "plain", "a \"quote\" and \\", "two\nlines\ttab", std::string("nul\0", 4), "größe 光 🔭", "\x7f"};
  const std::vector<std::string> bad = {"\xff",    "a\xc3", "\xc0\xaf", "\xed\xa0\x80", "\xf4\x90\x80\x80",
                                        "\xe2\x82"};
  std::ofstream(folder.path() / "lines", std::ios::binary) << [&] {
    std::string lines;
    for (const auto& text : good) lines += json_quoted(text) + "\n";
    for (const auto& text : bad) lines += json_quoted(text) + "\n";
    return lines;
  }();
  std::ofstream(folder.path() / "read.py")
      << "import json, sys\n"
         "for line in open(sys.argv[1], encoding='utf-8', newline='\\n'):\n"
         "    print(json.loads(line).encode().hex())\n";

  const auto finished =
      testing_support::run(fmt::format("/usr/bin/python3 '{0}/read.py' '{0}/lines'", folder.path().string()));

  ASSERT_EQ(finished.status, 0) << finished.output;
  const auto lines = split(finished.output, '\n');
  ASSERT_EQ(lines.size(), good.size() + bad.size() + 1);
  for (std::size_t i = 0; i < good.size(); ++i) {
    std::string hex;
    for (const char c : good[i]) hex += fmt::format("{:02x}", static_cast<unsigned char>(c));
    EXPECT_EQ(lines[i], hex);
  }
  for (std::size_t i = good.size(); i + 1 < lines.size(); ++i)
    EXPECT_THAT(lines[i], testing::HasSubstr("efbfbd"));
}

}  // namespace
}  // namespace bentlight
