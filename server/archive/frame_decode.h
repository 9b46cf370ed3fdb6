// One chunk of a dataset, from its stored bytes to its elements. Pure: bytes in, bytes out.
//
// The order of the filters and the form of their bytes follow the HDF5 File Format Specification,
// version 3.0, IV.A.2.l "The Data Storage - Filter Pipeline Message" (from memory), and are tested against
// files by h5py.
#pragma once

#include <cstddef>
#include <cstdint>
#include <memory>
#include <span>
#include <vector>

#include "archive/wavefront_file.h"
#include "base/error.h"

struct libdeflate_decompressor;

namespace bentlight::archive {

/// Inflates zlib streams of known size.
///
///   threads  one at a time
class Inflater {
 public:
  /// Fills the whole of `out`; false when the stream is damaged or holds another number of bytes.
  bool inflate(std::span<const std::byte> stream, std::span<std::byte> out);

 private:
  struct Release {
    void operator()(libdeflate_decompressor* inflater) const;
  };
  std::unique_ptr<libdeflate_decompressor, Release> inflater_;  // made at the first use
};

/// Memory that decoding reuses from chunk to chunk.
struct DecodeScratch {
  Inflater inflater;
  std::vector<std::byte> first, second;  // what filters hand to one another
};

/// How the chunks of one dataset are coded.
struct ChunkCoding {
  std::span<const Filter> filters;  // in the order of writing
  std::size_t element_bytes = 0;
  std::size_t decoded_bytes = 0;
};

/// The elements of one chunk, as stored elements (byte order and scale untouched).
struct DecodedChunk {
  std::span<const std::byte> bytes;
  bool is_shuffled = false;  // byte k of all elements lies together; see unshuffle
};

/// Undoes the filters of one chunk, but for a shuffle that was the first to be applied: that one is best
/// undone piece by piece where the elements are used, in cache.
///
///   shapes   the result lies in `stored` or in `scratch`, and holds as long as both do
///   needs    at most one deflate among the filters
///   errors   damaged_file when a stage yields another number of bytes than it must, or the checksum differs
Expected<DecodedChunk> decode_chunk(const ChunkCoding& coding,
                                    std::uint32_t filter_mask,
                                    std::span<const std::byte> stored,
                                    DecodeScratch& scratch);

/// The Fletcher-32 checksum as HDF5 stores it: over big-endian words of 16 bits, both sums starting at zero.
std::uint32_t fletcher32(std::span<const std::byte> bytes);

/// Undoes the shuffle filter, which puts byte k of every element together, for some elements of a chunk.
///
///   shapes   shuffled [bytes of the chunk]; out [elements * element_bytes], not overlapping
///   throws   std::invalid_argument when the elements are not among the chunk's
void unshuffle(std::span<const std::byte> shuffled,
               std::size_t element_bytes,
               std::size_t first_element,
               std::span<std::byte> out);

}  // namespace bentlight::archive
