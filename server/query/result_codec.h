// A result as one file of our own: what the cache keeps, so that every encoding and the permalink come from
// one place.
//
//   bytes 0..7    "BNTLRES1": the format and its version
//   8..15         size of the head in bytes, a multiple of 8
//   16..23        size of the numbers in bytes
//   24..31        XXH3 of all that follows
//   32..          the head: JSON, padded with blanks; names, units, shapes, warnings, provenance
//   then          the numbers: for each value its value, low, high and level as float64; then each array's
//   data, padded
//                 with zeros to a multiple of 8
//
// Whole numbers and elements are little-endian.
#pragma once

#include <cstddef>
#include <span>
#include <string_view>
#include <vector>

#include "base/error.h"
#include "query/result.h"

namespace bentlight::query {

/// throws  std::invalid_argument when an array's data do not fill its shape
std::vector<std::byte> encode_result(const Result& result);

/// The result that encode_result() was given, numbers bit for bit. Trusts nothing in `bytes`; memory stays
/// within a small multiple of their number.
///
///   errors  damaged_state
Expected<Result> decode_result(std::span<const std::byte> bytes);

/// A head and numbers as such a file, with sizes and checksum in front: for encode_result(), and for tests
/// that want to get past the checksum.
std::vector<std::byte> sealed_result(std::string_view head, std::span<const std::byte> numbers);

}  // namespace bentlight::query
