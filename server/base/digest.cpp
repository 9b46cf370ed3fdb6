#include "base/digest.h"

#include <array>
#include <stdexcept>

#include <openssl/evp.h>
#include <xxhash.h>

namespace bentlight {

std::string sha256_hex(std::string_view bytes) {
  std::array<unsigned char, 32> digest{};
  unsigned int length = 0;
  if (EVP_Digest(bytes.data(), bytes.size(), digest.data(), &length, EVP_sha256(), nullptr) != 1) {
    throw std::runtime_error("sha256_hex: the library refused to compute a digest");
  }
  constexpr std::string_view digits = "0123456789abcdef";
  std::string hex;
  hex.reserve(64);
  for (const unsigned char byte : digest) {
    hex += digits[byte >> 4];
    hex += digits[byte & 15];
  }
  return hex;
}

std::uint64_t checksum(std::span<const std::byte> bytes) { return XXH3_64bits(bytes.data(), bytes.size()); }

}  // namespace bentlight
