#include "archive/wavefront_file.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <fstream>

#include "support/sample_wavefront_file.h"
#include "support/temporary_folder.h"

namespace bentlight::archive {
namespace {

const PosixFileSystem files;

TEST(WavefrontFile, IsLoadedAsItWasSaved) {
  const test::TemporaryFolder folder;
  const WavefrontFile file = test::sample_wavefront_file();

  ASSERT_TRUE(save_wavefront_file(files, folder.path(), file));
  const auto again = load_wavefront_file(files, folder.path());

  ASSERT_TRUE(again) << again.error().text;
  test::expect_same(*again, file);
}

TEST(WavefrontFile, IsSavedWithoutWhatItDoesNotHave) {
  const test::TemporaryFolder folder;
  WavefrontFile file = test::sample_wavefront_file();
  file.time_s.clear();
  file.signals.clear();
  file.map.storage = Storage::contiguous;
  file.map.chunks.clear();
  file.map.data_offset = 4096;

  ASSERT_TRUE(save_wavefront_file(files, folder.path(), file));
  const auto again = load_wavefront_file(files, folder.path());

  ASSERT_TRUE(again) << again.error().text;
  test::expect_same(*again, file);
  EXPECT_FALSE(std::filesystem::exists(folder.path() / "chunks.npy"));
  EXPECT_FALSE(std::filesystem::exists(folder.path() / "time.npy"));
}

// NumPy is the outside reader of what we keep.
TEST(WavefrontFile, KeepsArraysThatNumPyReads) {
  const test::TemporaryFolder folder;
  ASSERT_TRUE(save_wavefront_file(files, folder.path(), test::sample_wavefront_file()));

  const std::string script = "import numpy as np; load = lambda n: np.load('" + folder.path().string() +
                             "/' + n + '.npy'); "
                             "assert load('chunks').tolist() == [[100000, 4000 + 5 * 2**32], [0, 0]]; "
                             "assert load('mask').tolist() == [[1, 0], [1, 1], [1, 0]]; "
                             "assert load('y').tolist() == [0.0, 0.1, 1 / 3]; "
                             "assert load('signals').dtype == 'f4' and load('signals').shape == (2, 4)";

  EXPECT_EQ(std::system(("/usr/bin/python3 -c \"" + script + "\"").c_str()), 0);
}

TEST(WavefrontFile, IsNotSavedOverAnother) {
  const test::TemporaryFolder folder;
  ASSERT_TRUE(save_wavefront_file(files, folder.path(), test::sample_wavefront_file()));

  EXPECT_FALSE(save_wavefront_file(files, folder.path(), test::sample_wavefront_file()));
}

TEST(WavefrontFile, IsRefusedWhenAnyOfItIsTornRottenOrGone) {
  const test::TemporaryFolder origin;
  ASSERT_TRUE(save_wavefront_file(files, origin.path(), test::sample_wavefront_file()));

  std::size_t parts = 0;
  for (const auto& entry : std::filesystem::directory_iterator(origin.path())) {
    SCOPED_TRACE(entry.path().filename());
    ++parts;
    const auto bytes = entry.file_size();
    const auto refused_after = [&](const std::function<void(const std::filesystem::path&)>& harm) {
      const test::TemporaryFolder folder;
      std::filesystem::copy(origin.path(), folder.path());
      harm(folder.path() / entry.path().filename());
      const auto file = load_wavefront_file(files, folder.path());
      ASSERT_FALSE(file);
      EXPECT_EQ(file.error().code, ErrorCode::damaged_state) << file.error().text;
      EXPECT_EQ(file.error().subject, folder.path());
    };
    refused_after([](const auto& path) { std::filesystem::remove(path); });
    refused_after([](const auto& path) { std::filesystem::resize_file(path, 0); });
    refused_after([&](const auto& path) { std::filesystem::resize_file(path, bytes / 2); });
    refused_after([&](const auto& path) {
      std::fstream stream(path, std::ios::in | std::ios::out | std::ios::binary);
      stream.seekg(static_cast<std::streamoff>(bytes - 20));
      const int byte = stream.get();
      stream.seekp(static_cast<std::streamoff>(bytes - 20));
      stream.put(static_cast<char>(byte ^ 1));
    });
  }

  EXPECT_EQ(parts, 7);
}

// Sound bytes whose numbers lead beyond the file that they describe.
TEST(WavefrontFile, IsRefusedWhenItsNumbersLeaveTheFile) {
  const test::TemporaryFolder folder;
  WavefrontFile file = test::sample_wavefront_file();
  file.map.chunks[0].offset = file.identity.stamp.size_bytes - 10;

  ASSERT_TRUE(save_wavefront_file(files, folder.path(), file));

  EXPECT_EQ(load_wavefront_file(files, folder.path()).error().code, ErrorCode::damaged_state);
}

}  // namespace
}  // namespace bentlight::archive
