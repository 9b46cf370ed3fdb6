#include "base/file.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <sys/stat.h>
#include <unistd.h>

#include <fstream>
#include <thread>
#include <vector>

#include "support/temporary_folder.h"

namespace bentlight {
namespace {

namespace fs = std::filesystem;
using testing::HasSubstr;

class Files : public testing::Test {
 protected:
  fs::path at(const std::string& name) const { return folder_.path() / name; }
  std::string content(const std::string& name) const { return read_whole(files_, at(name), 1 << 20).value(); }
  std::vector<std::string> names() const {
    std::vector<std::string> found;
    for (const auto& entry : fs::directory_iterator(folder_.path())) found.push_back(entry.path().filename());
    return found;
  }

  const test::TemporaryFolder folder_;
  const PosixFileSystem files_;
};

TEST_F(Files, ReadFromAnyPlace) {
  std::ofstream(at("a")) << "0123456789";
  const auto file = files_.open(at("a")).value();
  std::string part(4, '?');

  ASSERT_TRUE(file->read_at(6, std::as_writable_bytes(std::span(part))));

  EXPECT_EQ(part, "6789");
}

TEST_F(Files, SayThatAFileEndedTooEarly) {
  std::ofstream(at("a")) << "0123456789";
  const auto file = files_.open(at("a")).value();
  std::string part(4, '?');

  const auto read = file->read_at(7, std::as_writable_bytes(std::span(part)));

  ASSERT_FALSE(read);
  EXPECT_EQ(read.error().code, ErrorCode::file_changed);
  EXPECT_EQ(read.error().subject, at("a").string());
}

TEST_F(Files, SayWhatIsMissing) {
  EXPECT_EQ(files_.open(at("nothing")).error().code, ErrorCode::file_missing);
  EXPECT_EQ(files_.stamp(at("nothing")).error().code, ErrorCode::file_missing);
  EXPECT_EQ(files_.open(at("nothing")).error().subject, at("nothing").string());
}

// Without O_NONBLOCK the call would wait for a writer for ever.
TEST_F(Files, RefusePipesAndFoldersWithoutWaiting) {
  ASSERT_EQ(::mkfifo(at("pipe").c_str(), 0600), 0);

  EXPECT_EQ(files_.open(at("pipe")).error().code, ErrorCode::unsafe_file);
  EXPECT_EQ(files_.open(folder_.path()).error().code, ErrorCode::unsafe_file);
}

TEST_F(Files, AreTheSameUntilTheyAreWritten) {
  std::ofstream(at("a")) << "one";
  const auto before = files_.stamp(at("a")).value();
  EXPECT_EQ(files_.stamp(at("a")).value(), before);
  EXPECT_EQ(files_.open(at("a")).value()->stamp().value(), before);

  std::ofstream(at("a"), std::ios::app) << "!";
  EXPECT_NE(files_.stamp(at("a")).value(), before);

  ASSERT_TRUE(files_.replace(at("a"), as_bytes("one")));
  EXPECT_NE(files_.stamp(at("a")).value(), before);  // another inode
}

TEST_F(Files, AreReplacedWholeAndNothingElseIsLeft) {
  ASSERT_TRUE(files_.replace(at("a"), as_bytes("first")));
  ASSERT_TRUE(files_.replace(at("a"), as_bytes("second")));

  EXPECT_EQ(content("a"), "second");
  EXPECT_THAT(names(), testing::ElementsAre("a"));
}

TEST_F(Files, KeepTheOldContentWhenTheyCannotBeReplaced) {
  ASSERT_TRUE(files_.replace(at("a"), as_bytes("first")));
  fs::create_directory(at("folder"));

  const auto replaced = files_.replace(at("folder"), as_bytes("second"));

  ASSERT_FALSE(replaced);
  EXPECT_EQ(replaced.error().subject, at("folder").string());
  EXPECT_TRUE(fs::is_directory(at("folder")));
  EXPECT_EQ(names().size(), 2U);  // nothing is left aside
}

TEST_F(Files, AreReplacedByManyThreadsAtOnce) {
  const std::string one(100'000, '1'), two(100'000, '2');
  {
    std::vector<std::jthread> writers;
    for (const auto* text : {&one, &two, &one, &two}) {
      writers.emplace_back([this, text] {
        for (int i = 0; i < 10; ++i) EXPECT_TRUE(files_.replace(at("a"), as_bytes(*text)));
      });
    }
  }

  const std::string left = content("a");
  EXPECT_TRUE(left == one || left == two);
  EXPECT_THAT(names(), testing::ElementsAre("a"));
}

TEST_F(Files, AreNotCreatedTwice) {
  ASSERT_TRUE(files_.create(at("a"), as_bytes("first")));

  EXPECT_FALSE(files_.create(at("a"), as_bytes("second")));
  EXPECT_FALSE(files_.start(at("a")));
  EXPECT_EQ(content("a"), "first");
}

TEST_F(Files, GrowBitByBit) {
  const auto file = files_.start(at("a")).value();
  ASSERT_TRUE(file->append(as_bytes("one ")));
  ASSERT_TRUE(file->append({}));
  ASSERT_TRUE(file->append(as_bytes("two")));
  ASSERT_TRUE(file->finish());

  EXPECT_EQ(content("a"), "one two");
}

// /dev/full answers every write with ENOSPC (full(4)).
TEST_F(Files, SayThatTheDiskIsFull) {
  fs::create_symlink("/dev/full", at("full"));
  const auto aside = at("full").string();

  // O_EXCL does not follow a link, so the way there is the file aside that replace() opens.
  fs::create_symlink("/dev/full", at("a." + std::to_string(::gettid()) + ".aside"));
  const auto replaced = files_.replace(at("a"), as_bytes("text"));

  ASSERT_FALSE(replaced);
  EXPECT_EQ(replaced.error().code, ErrorCode::disk_full);
  EXPECT_FALSE(fs::exists(at("a")));
}

TEST_F(Files, OfAFolderAppearTogether) {
  fs::create_directories(at("staging"));
  fs::create_directories(at("final"));
  ASSERT_TRUE(files_.create(at("staging") / "a", as_bytes("text")));

  ASSERT_TRUE(files_.publish_folder(at("staging"), at("final") / "one"));

  EXPECT_EQ(content("final/one/a"), "text");
  EXPECT_FALSE(fs::exists(at("staging")));
}

TEST_F(Files, OfAFolderDoNotReplaceAnotherFolder) {
  for (const char* name : {"one", "two"}) {
    fs::create_directory(at(name));
    ASSERT_TRUE(files_.create(at(name) / "a", as_bytes(name)));
  }

  EXPECT_FALSE(files_.publish_folder(at("one"), at("two")));
  EXPECT_EQ(content("two/a"), "two");
}

TEST_F(Files, AreReadWholeUpToALimit) {
  std::ofstream(at("a")) << "0123456789";

  EXPECT_EQ(read_whole(files_, at("a"), 10), "0123456789");
  const auto refused = read_whole(files_, at("a"), 9);

  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().code, ErrorCode::too_large);
  EXPECT_THAT(refused.error().text, HasSubstr("10 bytes; at most 9"));
}

}  // namespace
}  // namespace bentlight
