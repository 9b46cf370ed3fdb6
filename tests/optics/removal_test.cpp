#include "optics/removal.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <numeric>

namespace bentlight::optics {

using ::testing::ElementsAre;

TEST(Removal, ReadsEveryName) {
  const auto removal = parse_removal("mean,focus,tilt,piston").value();
  EXPECT_TRUE(removal.mean);
  EXPECT_THAT(removal.modes, ElementsAre(1, 2, 3, 4));
}

TEST(Removal, OfNoneKeepsEverything) {
  EXPECT_EQ(parse_removal("none").value(), Removal{});
  EXPECT_EQ(to_text(Removal{}), "none");
}

TEST(Removal, CountsModesFromPiston) {
  EXPECT_THAT(parse_removal("modes:5").value().modes, ElementsAre(1, 2, 3, 4, 5));
  EXPECT_EQ(parse_removal("modes:231").value().modes.size(), 231U);
}

TEST(Removal, RefusesWhatItDoesNotKnowAndSaysWhatItDoes) {
  for (const char* text :
       {"", "pistons", "modes:0", "modes:232", "modes:-1", "modes:2.5", "modes:", "piston,,tilt",
        "piston,none", "none,mean", " piston", "PISTON", "modes:99999999999999999999"}) {
    const auto removal = parse_removal(text);
    ASSERT_FALSE(removal) << text;
    EXPECT_EQ(removal.error().code, ErrorCode::bad_parameter);
    EXPECT_EQ(removal.error().subject, "remove");
    EXPECT_THAT(removal.error().accepted,
                ElementsAre("piston", "tilt", "mean", "focus", "modes:N with N from 1 to 231", "none"));
  }
}

TEST(Removal, HasOneTextForEqualRemovals) {
  EXPECT_EQ(to_text(parse_removal("mean,tilt,piston,tilt").value()), "piston,tilt,mean");
  EXPECT_EQ(to_text(parse_removal("modes:3,mean").value()), "piston,tilt,mean");
  EXPECT_EQ(to_text(parse_removal("focus,modes:3").value()), "modes:4");
  EXPECT_EQ(to_text(parse_removal("tilt,focus").value()), "tilt,focus");
}

// Once written as "piston,tilt", which takes out a third mode.
TEST(Removal, OfTwoModesIsNotThatOfThree) {
  EXPECT_EQ(to_text(parse_removal("modes:2").value()), "modes:2");
  EXPECT_EQ(to_text(parse_removal("modes:2,focus").value()), "modes:2,focus");
}

TEST(Removal, ReadsItsOwnTextBack) {
  const std::vector<std::string> names = {"piston",  "tilt",    "mean",    "focus",   "modes:1",
                                          "modes:2", "modes:3", "modes:4", "modes:17"};
  for (unsigned chosen = 1; chosen < 1U << names.size(); ++chosen) {
    std::string text;
    for (std::size_t i = 0; i < names.size(); ++i) {
      if ((chosen >> i & 1U) != 0) text += (text.empty() ? "" : ",") + names[i];
    }
    const auto removal = parse_removal(text).value();
    EXPECT_EQ(parse_removal(to_text(removal)).value(), removal) << text;
  }
}

}  // namespace bentlight::optics
