// NPY: read by NumPy, whose format it is.
#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include "query/encode/encoding.h"
#include "support/result_samples.h"

namespace bentlight::query {
namespace {

using test::python;

TEST(EncodeNpy, FloatsStayFloatsAndDoublesDoubles) {
  const Result result = test::small_result();

  EXPECT_EQ(python("import sys, numpy as np\na = np.load(sys.argv[1])\n"
                   "print(a.dtype.str, a.shape, a.flags.c_contiguous, a.tolist() == np.float32([[.1, .2], "
                   "[.3, .4], [.5, .6]]).tolist())\n",
                   encode_npy(result, "rms_map").value()),
            "<f4 (3, 2) True True\n");
  EXPECT_EQ(python("import sys, numpy as np\na = np.load(sys.argv[1])\nprint(a.dtype.str, a.tolist())\n",
                   encode_npy(result, "mean").value()),
            "<f8 [0.1, -2.0, 3e-07]\n");
}

TEST(EncodeNpy, KeepsEveryBit) {
  const auto numbers = test::any_numbers<double>(5'000, 4);
  Result result;
  result.arrays.push_back(test::array_of("a", {5, 10, 100}, {"m"}, {}, numbers));
  const std::string bytes = encode_npy(result, "").value();

  EXPECT_THAT(bytes, testing::EndsWith(std::string(test::bits_of(numbers))));
  EXPECT_EQ(python("import sys, numpy as np\nprint(np.load(sys.argv[1]).shape)\n", bytes), "(5, 10, 100)\n");
}

TEST(EncodeNpy, EmptyAndScalarArraysHaveTheirShapes) {
  Result result;
  result.arrays.push_back(test::array_of("none", {0, 7}, {"m"}, {}, std::vector<float>()));
  result.arrays.push_back(test::array_of("one", {}, {"m"}, {}, std::vector{2.5}));

  EXPECT_EQ(python("import sys, numpy as np\nprint(np.load(sys.argv[1]).shape)\n",
                   encode_npy(result, "none").value()),
            "(0, 7)\n");
  EXPECT_EQ(python("import sys, numpy as np\na = np.load(sys.argv[1])\nprint(a.shape, a)\n",
                   encode_npy(result, "one").value()),
            "() 2.5\n");
}

TEST(EncodeNpy, TheOnlyArrayThatIsNoAxisNeedsNoName) {
  Result result = test::small_result();
  std::erase_if(result.arrays,
                [](const Array& array) { return array.name == "mean" || array.name == "time"; });

  EXPECT_EQ(encode_npy(result, "").value(), encode_npy(result, "rms_map").value());
}

TEST(EncodeNpy, AsksWhichArrayWhenSeveralCouldBeMeant) {
  const auto refused = encode_npy(test::small_result(), "");

  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().code, ErrorCode::unsupported_encoding);
  EXPECT_THAT(refused.error().accepted, testing::ElementsAre("time", "mean", "x", "y", "rms_map"));
}

TEST(EncodeNpy, OfAResultWithoutArraysIsRefused) {
  const auto refused = encode_npy({}, "");

  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().code, ErrorCode::unsupported_encoding);
  EXPECT_THAT(refused.error().accepted, testing::ElementsAre("json", "csv", "hdf5"));
}

TEST(EncodeNpy, OfAnUnknownArrayNamesThoseThereAre) {
  const auto refused = encode_npy(test::small_result(), "psd");

  ASSERT_FALSE(refused);
  EXPECT_EQ(refused.error().code, ErrorCode::bad_parameter);
  EXPECT_THAT(refused.error().accepted, testing::Contains("rms_map"));
}

}  // namespace
}  // namespace bentlight::query
