#include "base/error.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cerrno>
#include <regex>
#include <set>
#include <string>

namespace bentlight {
namespace {

TEST(ErrorCode, HasANameOfItsOwnFitForAnAddress) {
  std::set<std::string> names;
  const std::regex words("[a-z]+(-[a-z0-9]+)*");
  for (const ErrorCode code : all_error_codes()) {
    const std::string text(name(code));
    EXPECT_TRUE(std::regex_match(text, words)) << text;
    EXPECT_TRUE(names.insert(text).second) << text;
  }
  EXPECT_EQ(names.size(), static_cast<std::size_t>(ErrorCode::internal) + 1);
}

TEST(ErrorCode, OfTheSystemTellsWhatToMend) {
  EXPECT_EQ(code_of_errno(ENOSPC), ErrorCode::disk_full);
  EXPECT_EQ(code_of_errno(EDQUOT), ErrorCode::disk_full);
  EXPECT_EQ(code_of_errno(EACCES), ErrorCode::permission_denied);
  EXPECT_EQ(code_of_errno(EROFS), ErrorCode::permission_denied);
  EXPECT_EQ(code_of_errno(ENOENT), ErrorCode::file_missing);
  EXPECT_EQ(code_of_errno(EIO), ErrorCode::io_error);
}

TEST(Error, OfTheSystemSaysWhatWasDoneToWhatAndWhy) {
  const Expected<int> failed = system_failure(ENOSPC, "writing", "a file");

  EXPECT_EQ(failed.error().text, "writing: No space left on device");
  EXPECT_EQ(failed.error().subject, "a file");
}

TEST(Error, IsPassedOnUnchanged) {
  const Expected<int> first = failure(ErrorCode::bad_unit, "text", "subject", {"m", "um"});

  const Expected<std::string> second = failure(first);

  EXPECT_EQ(second.error().code, ErrorCode::bad_unit);
  EXPECT_EQ(second.error().text, "text");
  EXPECT_EQ(second.error().subject, "subject");
  EXPECT_THAT(second.error().accepted, testing::ElementsAre("m", "um"));
}

}  // namespace
}  // namespace bentlight
