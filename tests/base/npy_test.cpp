#include "base/npy.h"

#include <fmt/format.h>
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cstring>
#include <fstream>
#include <iterator>

#include "base/file.h"
#include "support/command.h"
#include "support/temporary_folder.h"

namespace bentlight {
namespace {

using test::TemporaryFolder;
using testing::ElementsAre;
using testing::HasSubstr;
using testing::IsEmpty;

std::vector<std::byte> bytes_of(const std::filesystem::path& path) {
  std::ifstream stream(path, std::ios::binary);
  const std::string text{std::istreambuf_iterator<char>(stream), {}};
  const auto bytes = as_bytes(text);
  return {bytes.begin(), bytes.end()};
}

void write(const std::filesystem::path& path, std::span<const std::byte> bytes) {
  std::ofstream(path, std::ios::binary)
      .write(reinterpret_cast<const char*>(bytes.data()), static_cast<std::streamsize>(bytes.size()));
}

std::string python(const std::filesystem::path& folder, const std::string& lines) {
  std::ofstream(folder / "script.py") << "import numpy as np\n" << lines;
  const auto finished =
      testing_support::run(fmt::format("cd '{}' && /usr/bin/python3 script.py", folder.string()));
  return finished.status == 0 ? finished.output : "[failed] " + finished.output;
}

template <class Element>
std::vector<std::byte> image(std::string_view descr,
                             std::vector<std::size_t> shape,
                             const std::vector<Element>& data) {
  return npy_image(descr, shape, std::as_bytes(std::span(data)));
}

TEST(Npy, IsReadByNumPy) {
  const TemporaryFolder folder;
  write(folder.path() / "a.npy", image<double>("<f8", {2, 3}, {1, 2, 3, 4, 5, 6.5}));
  write(folder.path() / "b.npy", image<std::uint8_t>("|u1", {4}, {1, 0, 255, 7}));
  write(folder.path() / "c.npy", image<std::int64_t>("<i8", {}, {-5}));
  write(folder.path() / "d.npy", image<float>("<f4", {3, 0, 2}, {}));

  const std::string printed = python(
      folder.path(), "for n in 'abcd': a = np.load(n + '.npy'); print(a.dtype.str, a.shape, a.tolist())");

  EXPECT_EQ(printed,
            "<f8 (2, 3) [[1.0, 2.0, 3.0], [4.0, 5.0, 6.5]]\n"
            "|u1 (4,) [1, 0, 255, 7]\n"
            "<i8 () -5\n"
            "<f4 (3, 0, 2) [[], [], []]\n");
}

TEST(Npy, ReadsWhatNumPyWrites) {
  const TemporaryFolder folder;
  ASSERT_EQ(python(folder.path(),
                   "a = np.arange(6, dtype='<i4').reshape(3, 2)\n"
                   "np.save('one.npy', a)\n"
                   "np.lib.format.write_array(open('two.npy', 'wb'), a, version=(2, 0))\n"
                   "np.save('scalar.npy', np.float64(0.25))\n"),
            "");
  for (const char* name : {"one.npy", "two.npy"}) {
    SCOPED_TRACE(name);
    const auto file = bytes_of(folder.path() / name);

    const auto view = parse_npy(file);

    ASSERT_TRUE(view) << view.error().text;
    EXPECT_EQ(view->descr, "<i4");
    EXPECT_THAT(view->shape, ElementsAre(3U, 2U));
    std::vector<std::int32_t> values(6);
    ASSERT_EQ(view->data.size(), sizeof(std::int32_t) * values.size());
    std::memcpy(values.data(), view->data.data(), view->data.size());
    EXPECT_THAT(values, ElementsAre(0, 1, 2, 3, 4, 5));
  }
  const auto scalar = bytes_of(folder.path() / "scalar.npy");
  const auto view = parse_npy(scalar);
  ASSERT_TRUE(view);
  EXPECT_THAT(view->shape, IsEmpty());
  EXPECT_EQ(view->data.size(), 8U);
}

// NumPy Enhancement Proposal 1 asks for 16 bytes, later versions of the format for 64.
TEST(Npy, AlignsItsDataTo64Bytes) {
  for (const std::size_t dimensions : {0U, 1U, 2U, 7U, 30U}) {
    const std::vector<std::size_t> shape(dimensions, 1);

    const auto header = parse_npy_header(npy_image("|u1", shape, {}));

    ASSERT_TRUE(header) << header.error().text;
    EXPECT_EQ(header->data_offset % 64, 0U);
    EXPECT_EQ(header->shape, shape);
  }
}

// The readers of parts know where the data begin without reading the head.
TEST(Npy, HasAHeadOf128BytesForTheShapesOfSummaries) {
  for (const auto& shape : {std::vector<std::size_t>{1}, {36, 10'000'000'000}, {100'000'000, 16'777'216}}) {
    for (const char* descr : {"<f8", "<f4", "<i8", "|u1"})
      EXPECT_EQ(npy_image(descr, shape, {}).size(), 128U);
  }
}

struct BadHead {
  const char* what;
  const char* dictionary;
};

TEST(Npy, RefusesHeadsThatItWouldMisread) {
  for (const auto& [what, dictionary] : {
           BadHead{"column-major", "{'descr': '<f8', 'fortran_order': True, 'shape': (2,), }"},
           BadHead{"element type", "{'descr': '<c16', 'fortran_order': False, 'shape': (2,), }"},
           BadHead{"element type", "{'descr': [('a', '<f8')], 'fortran_order': False, 'shape': (2,), }"},
           BadHead{"element type", "{'fortran_order': False, 'shape': (2,), }"},
           BadHead{"extents", "{'descr': '<f8', 'fortran_order': False, 'shape': (-2,), }"},
           BadHead{"extents", "{'descr': '<f8', 'fortran_order': False, 'shape': (2, x), }"},
           BadHead{"tuple", "{'descr': '<f8', 'fortran_order': False, 'shape': 2"},
           BadHead{"overflows",
                   "{'descr': '<f8', 'fortran_order': False, 'shape': (4294967296, 4294967296, 2), }"},
           BadHead{"overflows",
                   "{'descr': '<f8', 'fortran_order': False, 'shape': (4611686018427387904,), }"},
       }) {
    SCOPED_TRACE(dictionary);
    std::string file("\x93NUMPY\x01\x00", 8);
    file += static_cast<char>(std::strlen(dictionary));
    file += '\0';
    file += dictionary;

    const auto view = parse_npy(as_bytes(file));

    ASSERT_FALSE(view);
    EXPECT_EQ(view.error().code, ErrorCode::damaged_file);
    EXPECT_THAT(view.error().text, HasSubstr(what));
  }
}

TEST(Npy, RefusesEveryFileThatIsCutShortOrTooLong) {
  auto file = image<double>("<f8", {3}, {1, 2, 3});
  for (std::size_t length = 0; length < file.size(); ++length) {
    const auto view = parse_npy(std::span(file).first(length));
    ASSERT_FALSE(view) << length;
    EXPECT_EQ(view.error().code, ErrorCode::damaged_file);
  }
  file.push_back({});
  EXPECT_FALSE(parse_npy(file));
}

TEST(Npy, NeverReadsBeyondAHeadOfNoise) {
  const auto good = image<double>("<f8", {3}, {1, 2, 3});
  for (std::size_t i = 0; i < good.size(); ++i) {
    for (const int noise : {0, 1, 0x7F, 0xFF, 0x28, 0x27}) {
      auto bad = good;
      bad[i] = static_cast<std::byte>(noise);
      if (const auto view = parse_npy(bad)) {
        // Whatever it is taken for, its data lie inside the file.
        EXPECT_EQ(view->data.data() + view->data.size(), bad.data() + bad.size());
      }
    }
  }
}

}  // namespace
}  // namespace bentlight
