#include "ingest/walk.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>
#include <sys/stat.h>
#include <unistd.h>

#include <fstream>

#include "support/temporary_folder.h"

namespace bentlight::ingest {
namespace {

namespace fs = std::filesystem;
using testing::ElementsAre;
using testing::IsEmpty;

class AWalk : public testing::Test {
 protected:
  void touch(const fs::path& path) const {
    fs::create_directories((root_ / path).parent_path());
    std::ofstream(root_ / path) << path.string();
  }

  std::vector<std::string> found() const {
    std::vector<std::string> paths;
    const auto listed = walk_archive(files_, root_).value();
    for (const auto& file : listed.files) paths.push_back(file.path.string());
    return paths;
  }

  const test::TemporaryFolder folder_;
  const fs::path root_ = folder_.path() / "archive";
  const PosixFileSystem files_;
};

TEST_F(AWalk, FindsFilesByTheirEndingInTheOrderOfTheirPaths) {
  for (const char* path :
       {"b/2.h5", "b/1.hdf5", "a/x/y/z.he5", "c.nc", "d.mat", "e.txt", "f.h5.bak", "h5", "g.layout.json"}) {
    touch(path);
  }

  EXPECT_THAT(found(), ElementsAre("a/x/y/z.he5", "b/1.hdf5", "b/2.h5", "c.nc", "d.mat"));
}

TEST_F(AWalk, StampsWhatItFinds) {
  touch("a.h5");

  EXPECT_EQ(walk_archive(files_, root_).value().files.at(0).stamp, files_.stamp(root_ / "a.h5"));
}

TEST_F(AWalk, PassesHiddenFilesAndFoldersOver) {
  touch(".a.h5");
  touch(".snapshot/b.h5");
  touch("c.h5");

  EXPECT_THAT(found(), ElementsAre("c.h5"));
}

TEST_F(AWalk, PassesOverWhatIsNoFile) {
  touch("a.h5");
  fs::create_directory(root_ / "folder.h5");
  ASSERT_EQ(::mkfifo((root_ / "pipe.h5").c_str(), 0600), 0);

  EXPECT_THAT(found(), ElementsAre("a.h5"));
}

TEST_F(AWalk, FollowsNoLinkOutOfTheArchiveAndNoneInCircles) {
  touch("inside/a.h5");
  fs::create_directories(folder_.path() / "outside");
  std::ofstream(folder_.path() / "outside/b.h5") << "b";
  fs::create_symlink(folder_.path() / "outside", root_ / "folder");
  fs::create_symlink(folder_.path() / "outside/b.h5", root_ / "file.h5");
  fs::create_symlink("../../outside/b.h5", root_ / "inside/relative.h5");
  fs::create_symlink(root_, root_ / "inside/circle");
  fs::create_symlink("nowhere", root_ / "broken.h5");

  const Walk walk = walk_archive(files_, root_).value();

  EXPECT_THAT(found(), ElementsAre("inside/a.h5"));
  EXPECT_THAT(walk.unreadable, IsEmpty());
}

// A folder beside the archive whose name begins with the archive's name is outside.
TEST_F(AWalk, TellsTheArchiveFromItsNeighbour) {
  touch("a.h5");
  fs::create_directories(folder_.path() / "archive-2");
  std::ofstream(folder_.path() / "archive-2/b.h5") << "b";
  fs::create_symlink(folder_.path() / "archive-2/b.h5", root_ / "b.h5");

  EXPECT_THAT(found(), ElementsAre("a.h5"));
}

TEST_F(AWalk, MayBeginAtALink) {
  touch("a.h5");
  fs::create_directory_symlink(root_, folder_.path() / "link");

  EXPECT_EQ(walk_archive(files_, folder_.path() / "link").value().files.size(), 1U);
}

TEST_F(AWalk, SaysThatThereIsNoArchive) {
  const auto walk = walk_archive(files_, folder_.path() / "nothing");

  ASSERT_FALSE(walk);
  EXPECT_EQ(walk.error().code, ErrorCode::file_missing);
}

/// Walks as a user for whom permissions count, in a process of its own; the status tells what went wrong.
[[noreturn]] void walk_as_nobody(const fs::path& root) {
  constexpr uid_t nobody = 65534;
  if (::geteuid() == 0 && ::setuid(nobody) != 0) ::_exit(10);
  const PosixFileSystem files;
  const auto walk = walk_archive(files, root);
  if (!walk) ::_exit(walk.error().code == ErrorCode::permission_denied ? 20 : 21);
  if (walk->files.size() != 1 || walk->files[0].path != "open/a.h5") ::_exit(1);
  if (walk->unreadable.size() != 1 || walk->unreadable[0].subject != "closed") ::_exit(2);
  if (walk->unreadable[0].code != ErrorCode::permission_denied) ::_exit(3);
  ::_exit(0);
}

TEST_F(AWalk, ReportsAFolderThatCannotBeReadAndGoesOn) {
  touch("closed/b.h5");
  touch("open/a.h5");
  fs::permissions(folder_.path(), fs::perms::all);
  fs::permissions(root_ / "closed", fs::perms::none);

  EXPECT_EXIT(walk_as_nobody(root_), testing::ExitedWithCode(0), "");

  fs::permissions(root_, fs::perms::none);
  EXPECT_EXIT(walk_as_nobody(root_), testing::ExitedWithCode(20), "");
  fs::permissions(root_, fs::perms::all);
  fs::permissions(root_ / "closed", fs::perms::all);
}

}  // namespace
}  // namespace bentlight::ingest
