#include "query/result_codec.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <cstring>
#include <random>

#include "base/file.h"
#include "query/encode/encoding.h"
#include "support/result_samples.h"

namespace bentlight::query {
namespace {

std::span<const std::byte> no_numbers() {
  return {};
}

/// A head that is right but for what a test puts into it.
std::string head_with(const std::string& values,
                      const std::string& arrays = "[]",
                      const std::string& provenance = "{}") {
  return R"({"analysis":"a","subject":"s","values":)" + values + R"(,"arrays":)" + arrays +
         R"(,"warnings":[],"provenance":)" + provenance + "}";
}

template <class Number>
bool same_bits(const std::vector<Number>& one, const std::vector<Number>& other) {
  return one.size() == other.size() && test::bits_of(one) == test::bits_of(other);
}

void expect_same(const std::optional<double>& one, const std::optional<double>& other) {
  ASSERT_EQ(one.has_value(), other.has_value());
  if (one) {
    EXPECT_TRUE(same_bits(std::vector{*one}, std::vector{*other}));
  }
}

void expect_same(const Result& one, const Result& other) {
  EXPECT_EQ(one.analysis, other.analysis);
  EXPECT_EQ(one.subject, other.subject);
  ASSERT_EQ(one.values.size(), other.values.size());
  for (std::size_t i = 0; i < one.values.size(); ++i) {
    EXPECT_EQ(one.values[i].name, other.values[i].name);
    EXPECT_EQ(one.values[i].unit, other.values[i].unit);
    expect_same(one.values[i].value, other.values[i].value);
    expect_same(one.values[i].low, other.values[i].low);
    expect_same(one.values[i].high, other.values[i].high);
    expect_same(one.values[i].level, other.values[i].level);
  }
  ASSERT_EQ(one.arrays.size(), other.arrays.size());
  for (std::size_t i = 0; i < one.arrays.size(); ++i) {
    const Array &a = one.arrays[i], &b = other.arrays[i];
    EXPECT_EQ(a.name, b.name);
    EXPECT_EQ(a.shape, b.shape);
    EXPECT_EQ(a.unit, b.unit);
    EXPECT_EQ(a.axes, b.axes);
    ASSERT_EQ(a.data.index(), b.data.index());
    EXPECT_TRUE(std::visit(
        [&](const auto& data) { return same_bits(data, std::get<std::decay_t<decltype(data)>>(b.data)); },
        a.data));
  }
  ASSERT_EQ(one.warnings.size(), other.warnings.size());
  for (std::size_t i = 0; i < one.warnings.size(); ++i)
    EXPECT_EQ(one.warnings[i].text, other.warnings[i].text);
  EXPECT_EQ(one.provenance, other.provenance);
}

TEST(ResultCodec, EncodeThenDecodeIsTheIdentity) {
  for (std::uint64_t seed = 1; seed <= 300; ++seed) {
    SCOPED_TRACE(seed);
    const Result result = test::any_result(seed);
    const auto decoded = decode_result(encode_result(result));
    ASSERT_TRUE(decoded) << decoded.error().text;
    expect_same(*decoded, result);
  }
}

// What a permalink promises: the same bytes, whether the result was kept on disk in between or not.
TEST(ResultCodec, ADecodedResultEncodesToTheSameReply) {
  for (std::uint64_t seed = 1; seed <= 100; ++seed) {
    SCOPED_TRACE(seed);
    const Result result = test::any_result(seed);
    const Result decoded = decode_result(encode_result(result)).value();
    EXPECT_EQ(encode_json(decoded), encode_json(result));
    EXPECT_EQ(encode_csv(decoded, "").value(), encode_csv(result, "").value());
  }
}

TEST(ResultCodec, NoCutFileIsTaken) {
  const auto bytes = encode_result(test::small_result());

  for (std::size_t length = 0; length < bytes.size(); ++length) {
    const auto refused = decode_result(std::span(bytes).first(length));
    ASSERT_FALSE(refused) << length;
    ASSERT_EQ(refused.error().code, ErrorCode::damaged_state);
  }
}

// XXH3 finds every single flipped bit (from memory: it is a bijection of any 8 bytes of a short input); flips
// in the preamble change format, sizes or the checksum itself.
TEST(ResultCodec, NoFlippedBitGoesUnseen) {
  const auto bytes = encode_result(test::small_result());

  for (std::size_t i = 0; i < bytes.size(); ++i) {
    auto rotten = bytes;
    rotten[i] ^= std::byte{1} << (i % 8);
    ASSERT_FALSE(decode_result(rotten)) << i;
  }
}

TEST(ResultCodec, NothingMayFollow) {
  auto bytes = encode_result(test::small_result());
  bytes.resize(bytes.size() + 8);

  EXPECT_FALSE(decode_result(bytes));
}

TEST(ResultCodec, AHeadThatIsNotAResultIsRefused) {
  const std::string shallow = head_with("[]");
  ASSERT_TRUE(decode_result(sealed_result(shallow, no_numbers())));

  for (const std::string& head :
       std::vector<std::string>{"", "null", "[]", "{", "{}", R"({"analysis":1})", shallow + "x",
                                head_with("{}x"), head_with("[{}]"), head_with("[1]"),
                                head_with("[]", R"([{"name":"a"}])"), head_with("[]", "[[]]"), "\xff\xfe"}) {
    SCOPED_TRACE(head);
    EXPECT_FALSE(decode_result(sealed_result(head, no_numbers())));
  }
}

std::string array_head(const std::string& shape,
                       const std::string& element = "f8",
                       const std::string& power = "0") {
  return head_with("[]", R"([{"name":"a","unit":"m","opd_power":)" + power + R"(,"shape":)" + shape +
                             R"(,"axes":[],"element":")" + element + "\"}]");
}

TEST(ResultCodec, ShapesThatLieAreRefused) {
  const std::vector<std::byte> numbers(16);
  ASSERT_TRUE(decode_result(sealed_result(array_head("[2]"), numbers)));
  ASSERT_TRUE(decode_result(sealed_result(array_head("[4]", "f4"), numbers)));

  for (const char* shape :
       {"[3]", "[1]", "[0]", "[-2]", "[2.0]", "[1e300]", "[null]", "[18446744073709551615]",
        "[4294967296,4294967296]", "[4294967296,4294967298]", "2", "\"2\"", "{\"a\":2}"}) {
    SCOPED_TRACE(shape);
    EXPECT_FALSE(decode_result(sealed_result(array_head(shape), numbers)));
  }
  EXPECT_FALSE(decode_result(sealed_result(array_head("[2]", "i8"), numbers)));
  for (const char* power : {"1.5", "1e300", "100", "-100", "\"1\"", "null"}) {
    EXPECT_FALSE(decode_result(sealed_result(array_head("[2]", "f8", power), numbers))) << power;
  }
}

// A JSON library that recurses would run out of stack, when parsing or later when the provenance is written
// out.
TEST(ResultCodec, ProvenanceThatNestsWithoutEndIsRefused) {
  const auto nested = [](std::size_t depth) { return std::string(depth, '[') + std::string(depth, ']'); };

  EXPECT_TRUE(decode_result(sealed_result(head_with("[]", "[]", nested(60)), no_numbers())));
  EXPECT_FALSE(decode_result(sealed_result(head_with("[]", "[]", nested(100'000)), no_numbers())));
  const std::string brackets_in_text = "\"" + std::string(1000, '[') + R"(\"[[[")";
  EXPECT_TRUE(decode_result(sealed_result(head_with("[]", "[]", brackets_in_text), no_numbers())));
}

TEST(ResultCodec, RandomBytesNeverPass) {
  std::mt19937_64 random(11);
  for (int i = 0; i < 20'000; ++i) {
    std::vector<std::byte> bytes(std::uniform_int_distribution<std::size_t>(0, 200)(random));
    for (std::byte& byte : bytes) byte = static_cast<std::byte>(random());
    if (i % 2 == 0 && bytes.size() >= 8) std::memcpy(bytes.data(), "BNTLRES1", 8);
    ASSERT_FALSE(decode_result(bytes));
  }
}

// Behind a right checksum anything may stand: the decoder must refuse it or give a result that can be
// encoded.
TEST(ResultCodec, MutatedHeadsBehindARightChecksumDoNoHarm) {
  const auto bytes = encode_result(test::any_result(5));
  std::uint64_t head_bytes = 0;
  std::memcpy(&head_bytes, bytes.data() + 8, 8);
  const std::string head(reinterpret_cast<const char*>(bytes.data()) + 32, head_bytes);
  const auto numbers = std::span(bytes).subspan(32 + head_bytes);
  std::mt19937_64 random(12);
  int passed = 0;
  for (int i = 0; i < 20'000; ++i) {
    std::string mutated = head;
    for (int k = 0; k < 1 + i % 3; ++k)
      mutated[random() % mutated.size()] = "0123456789[]{}\",:-e.nt "[random() % 23];
    if (const auto decoded = decode_result(sealed_result(mutated, numbers))) {
      ++passed;
      EXPECT_FALSE(encode_json(*decoded).empty());
    }
  }
  EXPECT_GT(passed, 100);  // else nothing was tried
}

TEST(ResultCodec, AnArrayThatDoesNotFillItsShapeIsAFaultOfTheProgram) {
  Result result;
  result.arrays.push_back(test::array_of("a", {3}, {"m"}, {}, std::vector{1.0}));

  EXPECT_THROW(encode_result(result), std::invalid_argument);
}

}  // namespace
}  // namespace bentlight::query
