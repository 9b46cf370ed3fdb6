// Digests: one for names that must never collide, one for bytes that may have been torn.
#pragma once

#include <cstddef>
#include <cstdint>
#include <span>
#include <string>
#include <string_view>

namespace bentlight {

/// SHA-256 of `bytes` as 64 lower-case hexadecimal digits (FIPS 180-4).
std::string sha256_hex(std::string_view bytes);

/// XXH3, 64 bits: a checksum at memory speed against torn or rotten files, not against malice.
std::uint64_t checksum(std::span<const std::byte> bytes);

}  // namespace bentlight
