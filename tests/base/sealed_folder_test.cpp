#include "base/sealed_folder.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <algorithm>
#include <fstream>
#include <iterator>
#include <random>

#include "support/temporary_folder.h"

namespace bentlight {
namespace {

namespace fs = std::filesystem;
using testing::HasSubstr;

const PosixFileSystem files;

std::vector<std::byte> noise(std::size_t count, unsigned seed) {
  std::mt19937 random(seed);
  std::vector<std::byte> bytes(count);
  for (auto& byte : bytes) byte = static_cast<std::byte>(random());
  return bytes;
}

void flip_a_bit(const fs::path& path, std::uint64_t offset) {
  std::fstream stream(path, std::ios::in | std::ios::out | std::ios::binary);
  stream.seekg(static_cast<std::streamoff>(offset));
  const char byte = static_cast<char>(stream.get() ^ 4);
  stream.seekp(static_cast<std::streamoff>(offset));
  stream.put(byte);
}

class Sealed : public testing::Test {
 protected:
  Sealed() {
    fs::create_directory(staging_);
    const SealedFolderWriter writer(files, staging_);
    EXPECT_TRUE(writer.add("large", large_));
    EXPECT_TRUE(writer.add("small", small_));
    EXPECT_TRUE(writer.add("empty", {}));
    EXPECT_TRUE(files.create(staging_ / "by another hand", {}).has_value());
    fs::rename(staging_ / "by another hand", staging_ / "by_another_hand");
    EXPECT_TRUE(writer.seal());
    EXPECT_TRUE(files.publish_folder(staging_, final_));
  }

  std::shared_ptr<const SealedFolder> opened() const { return SealedFolder::open(files, final_).value(); }

  /// The code and text with which opening fails.
  Error refused() const {
    const auto sealed = SealedFolder::open(files, final_);
    return sealed ? Error{.text = "opened"} : sealed.error();
  }

  const test::TemporaryFolder folder_;
  const fs::path staging_ = folder_.path() / "staging", final_ = folder_.path() / "final";
  const std::vector<std::byte> large_ = noise(5 * sealed_piece_bytes / 2, 1), small_ = noise(100, 2);
};

TEST_F(Sealed, GivesBackWhatWasPutIn) {
  const auto sealed = opened();

  EXPECT_EQ(sealed->read_all("large"), large_);
  EXPECT_EQ(sealed->read_all("small"), small_);
  EXPECT_EQ(sealed->read_all("empty"), std::vector<std::byte>{});
  EXPECT_EQ(sealed->size("large"), large_.size());
}

TEST_F(Sealed, TakesInFilesThatSomebodyElsePutThere) {
  EXPECT_TRUE(opened()->has("by_another_hand"));
}

TEST_F(Sealed, ReadsAnyPart) {
  const auto sealed = opened();
  std::mt19937 random(3);
  for (int trial = 0; trial < 200; ++trial) {
    const std::size_t first = random() % large_.size(), count = random() % (large_.size() - first + 1);
    std::vector<std::byte> part(count, std::byte{0xEE});

    ASSERT_TRUE(sealed->read("large", first, part));

    ASSERT_TRUE(std::equal(part.begin(), part.end(), large_.begin() + static_cast<std::ptrdiff_t>(first)))
        << first << " " << count;
  }
}

TEST_F(Sealed, RefusesPartsBeyondTheEnd) {
  const auto sealed = opened();
  std::vector<std::byte> part(2);

  EXPECT_EQ(sealed->read("small", 99, part).error().code, ErrorCode::damaged_state);
  EXPECT_EQ(sealed->read("small", ~std::uint64_t{0}, part).error().code, ErrorCode::damaged_state);
  EXPECT_EQ(sealed->read("nothing", 0, part).error().code, ErrorCode::damaged_state);
  EXPECT_FALSE(sealed->size("nothing"));
}

TEST_F(Sealed, FindsAnAlteredPieceWhenItIsTouchedAndOnlyThen) {
  flip_a_bit(final_ / "large", sealed_piece_bytes + 77);
  const auto sealed = opened();
  std::vector<std::byte> part(10);

  EXPECT_TRUE(sealed->read("large", sealed_piece_bytes - 10, part));
  EXPECT_TRUE(sealed->read("large", 2 * sealed_piece_bytes, part));
  const auto touched = sealed->read("large", sealed_piece_bytes - 9, part);

  ASSERT_FALSE(touched);
  EXPECT_EQ(touched.error().code, ErrorCode::damaged_state);
  EXPECT_THAT(touched.error().text, HasSubstr("large: altered or torn"));
  EXPECT_EQ(touched.error().subject, "final");
}

TEST_F(Sealed, FindsAFileOfAnotherLength) {
  fs::resize_file(final_ / "large", large_.size() - 1);

  EXPECT_EQ(refused().code, ErrorCode::damaged_state);
  EXPECT_THAT(refused().text, HasSubstr("large: of another size"));
}

TEST_F(Sealed, FindsAFileThatIsCutWhileItIsRead) {
  const auto sealed = opened();
  fs::resize_file(final_ / "large", 10);
  std::vector<std::byte> part(100);

  const auto read = sealed->read("large", 0, part);

  ASSERT_FALSE(read);
  EXPECT_EQ(read.error().code, ErrorCode::damaged_state);
}

TEST_F(Sealed, FindsAMissingFile) {
  fs::remove(final_ / "small");

  EXPECT_EQ(refused().code, ErrorCode::damaged_state);
  EXPECT_THAT(refused().text, HasSubstr("small"));
}

TEST_F(Sealed, FindsEveryAlterationOfItsManifest) {
  const auto manifest = final_ / "manifest.txt";
  const auto length = fs::file_size(manifest);
  for (std::uint64_t offset = 0; offset < length; ++offset) {
    flip_a_bit(manifest, offset);
    const auto code = refused().code;
    EXPECT_TRUE(code == ErrorCode::damaged_state || code == ErrorCode::newer_state) << offset;
    flip_a_bit(manifest, offset);
  }
  for (std::uint64_t shorter = 0; shorter < length; ++shorter) {
    const fs::path copy = final_ / "whole";
    fs::copy_file(manifest, copy, fs::copy_options::overwrite_existing);
    fs::resize_file(manifest, shorter);
    EXPECT_EQ(refused().code, ErrorCode::damaged_state) << shorter;
    fs::rename(copy, manifest);
  }
  EXPECT_TRUE(SealedFolder::open(files, final_));
}

TEST_F(Sealed, WithoutAManifestIsNotWhole) {
  fs::remove(final_ / "manifest.txt");

  EXPECT_EQ(refused().code, ErrorCode::damaged_state);
}

TEST_F(Sealed, OfALaterVersionIsLeftToTheLaterProgram) {
  std::ofstream(final_ / "manifest.txt") << "bentlight sealed folder 2\nsomething new\n";

  EXPECT_EQ(refused().code, ErrorCode::newer_state);
}

TEST_F(Sealed, StaysReadableForThoseWhoHaveItWhenItIsReplaced) {
  const auto sealed = opened();
  fs::remove_all(final_);
  fs::create_directory(final_);
  ASSERT_TRUE(files.create(final_ / "large", small_));

  EXPECT_EQ(sealed->read_all("large"), large_);
}

TEST(SealedFolderWriter, RefusesANameThatItsManifestCannotHold) {
  const test::TemporaryFolder folder;
  const SealedFolderWriter writer(files, folder.path());
  ASSERT_TRUE(writer.add("two words", {}));

  EXPECT_THROW(static_cast<void>(writer.seal()), std::invalid_argument);
}

}  // namespace
}  // namespace bentlight
