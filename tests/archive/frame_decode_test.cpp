#include "archive/frame_decode.h"

#include <gmock/gmock.h>
#include <gtest/gtest.h>

#include <array>
#include <cstring>
#include <numeric>
#include <random>

namespace bentlight::archive {
namespace {

std::vector<std::byte> bytes_of(std::initializer_list<int> values) {
  std::vector<std::byte> bytes;
  for (const int value : values) bytes.push_back(static_cast<std::byte>(value));
  return bytes;
}

std::vector<std::byte> random_bytes(std::size_t count) {
  std::mt19937 random(17);
  std::vector<std::byte> bytes(count);
  for (auto& byte : bytes) byte = static_cast<std::byte>(random() & 0xff);
  return bytes;
}

// By its definition: words of 16 bits, high byte first; the first sum adds words, the second adds first sums,
// both modulo 65535 by end-around carry.
std::uint32_t fletcher32_by_definition(const std::vector<std::byte>& bytes) {
  std::uint32_t sum1 = 0, sum2 = 0;
  const auto add = [](std::uint32_t& sum, std::uint32_t value) {
    sum += value;
    while (sum > 0xffff) sum = (sum & 0xffff) + (sum >> 16);
  };
  for (std::size_t i = 0; i < bytes.size(); i += 2) {
    const auto high = std::to_integer<std::uint32_t>(bytes[i]);
    const auto low = i + 1 < bytes.size() ? std::to_integer<std::uint32_t>(bytes[i + 1]) : 0;
    add(sum1, high << 8 | low);
    add(sum2, sum1);
  }
  return sum2 << 16 | sum1;
}

// 1 + 2 = 3 and 1 + 3 = 4: by hand.
TEST(Fletcher32, OfTwoWordsIsTheirSumAndTheSumOfSums) {
  EXPECT_EQ(fletcher32(bytes_of({0, 1, 0, 2})), 0x00040003U);
}

TEST(Fletcher32, CarriesAroundTheEndAndKnowsZeroOnlyForZeros) {
  EXPECT_EQ(fletcher32(bytes_of({0, 0, 0, 0})), 0U);
  EXPECT_EQ(fletcher32(bytes_of({0xff, 0xff})), 0xffffffffU);
}

// The order of a chunk's checksums as HDF5 writes them is tested against h5py's files in
// frame_reader_test.cpp.
TEST(Fletcher32, AgreesWithItsDefinitionAtEveryLength) {
  for (const std::size_t count : {0, 1, 2, 3, 719, 720, 721, 8191, 8192, 8193, 8194, 100'001}) {
    EXPECT_EQ(fletcher32(random_bytes(count)), fletcher32_by_definition(random_bytes(count)))
        << count << " bytes";
    const std::vector<std::byte> ones(count, std::byte{0xff});
    EXPECT_EQ(fletcher32(ones), fletcher32_by_definition(ones)) << count << " bytes";
  }
}

TEST(Unshuffle, PutsTheBytesOfAnElementTogether) {
  const auto shuffled = bytes_of({1, 2, 3, 11, 12, 13, 21, 22, 23, 31, 32, 33});
  std::vector<std::byte> all(12), last_two(8);

  unshuffle(shuffled, 4, 0, all);
  unshuffle(shuffled, 4, 1, last_two);

  EXPECT_EQ(all, bytes_of({1, 11, 21, 31, 2, 12, 22, 32, 3, 13, 23, 33}));
  EXPECT_EQ(last_two, bytes_of({2, 12, 22, 32, 3, 13, 23, 33}));
}

TEST(Unshuffle, UndoesShufflingOfEverySize) {
  for (const std::size_t size : {2, 4, 8}) {
    const auto original = random_bytes(size * 777);
    std::vector<std::byte> shuffled(original.size()), out(original.size());
    for (std::size_t i = 0; i < original.size(); ++i) shuffled[i % size * 777 + i / size] = original[i];

    unshuffle(shuffled, size, 0, out);

    EXPECT_EQ(out, original) << size;
  }
}

TEST(Unshuffle, RefusesElementsThatAreNotThere) {
  const std::vector<std::byte> shuffled(12);
  std::vector<std::byte> out(8);
  EXPECT_THROW(unshuffle(shuffled, 4, 2, out), std::invalid_argument);
  EXPECT_THROW(unshuffle(shuffled, 4, SIZE_MAX, out), std::invalid_argument);
  EXPECT_THROW(unshuffle(shuffled, 3, 0, out), std::invalid_argument);
}

// As nobody should but anybody may.
TEST(DecodeChunk, UndoesAShuffleThatCameAfterAChecksum) {
  constexpr std::array filters{Filter::fletcher32, Filter::shuffle};
  DecodeScratch scratch;
  // {1, 2, 3, 4} and its checksum by hand: 0x0102 + 0x0304 = 0x0406, 0x0102 + 0x0406 = 0x0508; a ninth byte
  // is too many.
  const auto shuffled = bytes_of({1, 0x06, 2, 0x04, 3, 0x08, 4, 0x05});

  const auto decoded = decode_chunk({filters, 4, 4}, 0, shuffled, scratch);

  ASSERT_TRUE(decoded) << decoded.error().text;
  EXPECT_FALSE(decoded->is_shuffled);
  EXPECT_TRUE(std::ranges::equal(decoded->bytes, bytes_of({1, 2, 3, 4})));
  EXPECT_FALSE(decode_chunk({filters, 4, 4}, 0, bytes_of({1, 6, 2, 4, 3, 8, 4, 5, 9}), scratch));
}

// A zlib stream of one stored block (RFC 1950, RFC 1951 3.2.4): header 78 01, final stored block, length and
// its complement, the bytes, Adler-32 of "abc", 0x024d0127 by hand: a = 1+97+98+99 = 295, b = 98+196+295 =
// 589.
const std::vector<std::byte> abc_stream =
    bytes_of({0x78, 0x01, 0x01, 3, 0, 0xfc, 0xff, 'a', 'b', 'c', 0x02, 0x4d, 0x01, 0x27});

TEST(Inflater, DemandsTheExactNumberOfBytes) {
  Inflater inflater;
  std::vector<std::byte> three(3), two(2), four(4);

  EXPECT_TRUE(inflater.inflate(abc_stream, three));
  EXPECT_EQ(three, bytes_of({'a', 'b', 'c'}));
  EXPECT_FALSE(inflater.inflate(abc_stream, two));
  EXPECT_FALSE(inflater.inflate(abc_stream, four));
}

TEST(Inflater, RefusesADamagedStream) {
  Inflater inflater;
  std::vector<std::byte> out(3);
  for (std::size_t i = 0; i < abc_stream.size(); ++i) {
    auto damaged = abc_stream;
    damaged[i] ^= std::byte{0x04};
    EXPECT_FALSE(inflater.inflate(damaged, out)) << "byte " << i;
    EXPECT_FALSE(inflater.inflate(std::span(abc_stream).first(i), out)) << "cut at " << i;
  }
}

TEST(DecodeChunk, RefusesASizeThatTheChunkMayNotHave) {
  constexpr std::array filters{Filter::deflate};
  DecodeScratch scratch;

  const auto fits = decode_chunk({filters, 1, 3}, 0, abc_stream, scratch);
  const auto short_of = decode_chunk({filters, 1, 4}, 0, abc_stream, scratch);
  const auto plain = decode_chunk({filters, 1, 14}, 1, abc_stream, scratch);  // the mask says: not deflated
  const auto plain_but_short = decode_chunk({filters, 1, 15}, 1, abc_stream, scratch);

  ASSERT_TRUE(fits);
  EXPECT_EQ(fits->bytes.size(), 3);
  ASSERT_FALSE(short_of);
  EXPECT_EQ(short_of.error().code, ErrorCode::damaged_file);
  ASSERT_TRUE(plain);
  EXPECT_EQ(plain->bytes.data(), abc_stream.data());
  EXPECT_FALSE(plain_but_short);
}

TEST(DecodeChunk, FindsAWrongChecksum) {
  constexpr std::array filters{Filter::fletcher32};
  DecodeScratch scratch;
  // The checksum 0x00040003 of {0, 1, 0, 2}, least byte first.
  const auto sound = bytes_of({0, 1, 0, 2, 3, 0, 4, 0});
  const auto old_library = bytes_of({0, 1, 0, 2, 0, 3, 0, 4});
  const auto rotten = bytes_of({0, 1, 0, 3, 3, 0, 4, 0});

  EXPECT_TRUE(decode_chunk({filters, 4, 4}, 0, sound, scratch));
  EXPECT_TRUE(decode_chunk({filters, 4, 4}, 0, old_library, scratch));
  EXPECT_EQ(decode_chunk({filters, 4, 4}, 0, rotten, scratch).error().code, ErrorCode::damaged_file);
  EXPECT_EQ(decode_chunk({filters, 4, 4}, 0, bytes_of({1, 2}), scratch).error().code,
            ErrorCode::damaged_file);
}

}  // namespace
}  // namespace bentlight::archive
