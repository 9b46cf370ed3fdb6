#include "base/digest.h"

#include <gtest/gtest.h>

#include <random>
#include <vector>

#include "base/file.h"

namespace bentlight {
namespace {

// NIST's examples of FIPS 180-4: one block, two blocks; from memory, and as sha256sum prints them.
TEST(Sha256, AgreesWithTheStandard) {
  EXPECT_EQ(sha256_hex(""), "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855");
  EXPECT_EQ(sha256_hex("abc"), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
  EXPECT_EQ(sha256_hex("abcdbcdecdefdefgefghfghighijhijkijkljklmklmnlmnomnopnopq"),
            "248d6a61d20638b8e5c026930c3e6039a33ce45964ff2167f6ecedd419db06c1");
}

// The reference implementation's value for no input with seed 0 (from memory).
TEST(Checksum, IsXxh3) {
  EXPECT_EQ(checksum({}), 0x2d06800538d394c2U);
}

TEST(Checksum, SeesEveryFlippedBit) {
  std::mt19937 random(1);
  std::vector<std::byte> bytes(1000);
  for (auto& byte : bytes) byte = static_cast<std::byte>(random());
  const std::uint64_t whole = checksum(bytes);
  for (std::size_t bit = 0; bit < 8 * bytes.size(); ++bit) {
    bytes[bit / 8] ^= std::byte{1} << (bit % 8);
    ASSERT_NE(checksum(bytes), whole) << bit;
    bytes[bit / 8] ^= std::byte{1} << (bit % 8);
  }
}

}  // namespace
}  // namespace bentlight
