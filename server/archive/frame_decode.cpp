#include "archive/frame_decode.h"

#include <fmt/format.h>
#include <libdeflate.h>

#include <algorithm>
#include <bit>
#include <cstring>
#include <stdexcept>

namespace bentlight::archive {

namespace {

constexpr std::size_t checksum_bytes = 4;

bool is_skipped(std::uint32_t filter_mask, std::size_t filter) {
  return (filter_mask >> filter & 1U) != 0;
}

/// How many bytes filter number `filter` must give back: what the filters before it made of the decoded
/// bytes.
std::size_t bytes_before(const ChunkCoding& coding, std::uint32_t filter_mask, std::size_t filter) {
  std::size_t bytes = coding.decoded_bytes;
  for (std::size_t i = 0; i < filter; ++i) {
    if (coding.filters[i] == Filter::fletcher32 && !is_skipped(filter_mask, i)) bytes += checksum_bytes;
  }
  return bytes;
}

/// The sum as repeated end-around carry leaves it: only a sum of nothing but zeros is zero.
std::uint64_t folded(std::uint64_t sum) {
  return sum == 0 ? 0 : (sum - 1) % 65535 + 1;
}

std::uint32_t big_endian_word(const std::byte* place) {
  std::uint16_t word;
  std::memcpy(&word, place, sizeof word);
  return std::endian::native == std::endian::little ? __builtin_bswap16(word) : word;
}

std::uint32_t swapped_in_halves(std::uint32_t sum) {
  return (sum & 0x00ff00ffU) << 8 | (sum & 0xff00ff00U) >> 8;
}

Expected<std::span<const std::byte>> without_checksum(std::span<const std::byte> bytes) {
  if (bytes.size() < checksum_bytes)
    return failure(ErrorCode::damaged_file, "a chunk is shorter than its checksum");
  const auto content = bytes.first(bytes.size() - checksum_bytes);
  std::uint32_t stored = 0;
  for (std::size_t i = 0; i < checksum_bytes; ++i) {
    stored |= static_cast<std::uint32_t>(bytes[content.size() + i]) << 8 * i;
  }
  const std::uint32_t computed = fletcher32(content);
  // Libraries up to 1.6.2 wrote each half swapped on little-endian machines; the library still reads those.
  if (stored != computed && stored != swapped_in_halves(computed)) {
    return failure(ErrorCode::damaged_file,
                   fmt::format("a chunk's checksum is {:08x}, its bytes give {:08x}", stored, computed));
  }
  return content;
}

/// A constant element size lets the compiler make whole registers of the loop.
template <std::size_t element_bytes>
void unshuffle_elements(const std::byte* in, std::size_t stride, std::span<std::byte> out) {
  const std::size_t elements = out.size() / element_bytes;
  for (std::size_t i = 0; i < elements; ++i) {
    for (std::size_t k = 0; k < element_bytes; ++k) out[i * element_bytes + k] = in[k * stride + i];
  }
}

/// The whole of what a shuffle made; bytes beyond the last whole element it has left where they were.
void unshuffle_all(std::span<const std::byte> in, std::size_t element_bytes, std::span<std::byte> out) {
  const std::size_t whole = in.size() / element_bytes * element_bytes;
  unshuffle(in, element_bytes, 0, out.first(whole));
  std::ranges::copy(in.subspan(whole), out.begin() + static_cast<std::ptrdiff_t>(whole));
}

}  // namespace

void Inflater::Release::operator()(libdeflate_decompressor* inflater) const {
  libdeflate_free_decompressor(inflater);
}

bool Inflater::inflate(std::span<const std::byte> stream, std::span<std::byte> out) {
  if (!inflater_) inflater_.reset(libdeflate_alloc_decompressor());
  if (!inflater_) throw std::bad_alloc();
  // Without a place for the actual size the library demands exactly out.size() bytes.
  return libdeflate_zlib_decompress(inflater_.get(), stream.data(), stream.size(), out.data(), out.size(),
                                    nullptr) == LIBDEFLATE_SUCCESS;
}

std::uint32_t fletcher32(std::span<const std::byte> bytes) {
  // Over a block of n words the second sum grows by n times the first and by the words weighted n … 1. With
  // blocks of 256 words the weighted sum stays within 32 bits (256 * 257 / 2 * 65535 < 2^32), and the loop in
  // vector registers.
  constexpr std::size_t block = 256;
  const std::size_t words = bytes.size() / 2;
  std::uint64_t sum1 = 0, sum2 = 0;
  for (std::size_t first = 0; first < words; first += block) {
    const auto count = static_cast<std::uint32_t>(std::min(block, words - first));
    const std::byte* in = bytes.data() + 2 * first;
    std::uint32_t plain = 0, weighted = 0;
    for (std::uint32_t i = 0; i < count; ++i) {
      const std::uint32_t word = big_endian_word(in + 2 * i);
      plain += word;
      weighted += word * (count - i);
    }
    sum2 = folded(sum2 + count * sum1 + weighted);
    sum1 = folded(sum1 + plain);
  }
  if (bytes.size() % 2 != 0) {
    sum1 = folded(sum1 + (std::to_integer<std::uint64_t>(bytes.back()) << 8));
    sum2 = folded(sum2 + sum1);
  }
  return static_cast<std::uint32_t>(sum2 << 16 | sum1);
}

void unshuffle(std::span<const std::byte> shuffled,
               std::size_t element_bytes,
               std::size_t first_element,
               std::span<std::byte> out) {
  const std::size_t elements = element_bytes == 0 ? 0 : shuffled.size() / element_bytes;
  if (first_element > elements || out.size() > (elements - first_element) * element_bytes) {
    throw std::invalid_argument("unshuffle: the elements are not among the chunk's");
  }
  const std::byte* in = shuffled.data() + first_element;
  switch (element_bytes) {
    case 2:
      return unshuffle_elements<2>(in, elements, out);
    case 4:
      return unshuffle_elements<4>(in, elements, out);
    case 8:
      return unshuffle_elements<8>(in, elements, out);
    default:
      throw std::invalid_argument("unshuffle: no element type has this size");
  }
}

Expected<DecodedChunk> decode_chunk(const ChunkCoding& coding,
                                    std::uint32_t filter_mask,
                                    std::span<const std::byte> stored,
                                    DecodeScratch& scratch) {
  std::span<const std::byte> bytes = stored;
  bool is_shuffled = false;
  for (std::size_t i = coding.filters.size(); i-- > 0;) {
    if (is_skipped(filter_mask, i)) continue;
    // The buffer that does not hold this stage's input takes its output.
    const bool in_first = !scratch.first.empty() && bytes.data() == scratch.first.data();
    std::vector<std::byte>& out = in_first ? scratch.second : scratch.first;
    switch (coding.filters[i]) {
      case Filter::fletcher32: {
        const auto content = without_checksum(bytes);
        if (!content) return failure(content);
        bytes = *content;
        break;
      }
      case Filter::deflate:
        out.resize(bytes_before(coding, filter_mask, i));
        if (!scratch.inflater.inflate(bytes, out)) {
          return failure(
              ErrorCode::damaged_file,
              fmt::format("a chunk of {} stored bytes does not inflate to {}", bytes.size(), out.size()));
        }
        bytes = out;
        break;
      case Filter::shuffle:
        if (i == 0) {
          is_shuffled = true;
          break;
        }
        out.resize(bytes.size());
        unshuffle_all(bytes, coding.element_bytes, out);
        bytes = out;
        break;
    }
  }
  if (bytes.size() != coding.decoded_bytes) {
    return failure(ErrorCode::damaged_file, fmt::format("a chunk decodes to {} bytes instead of {}",
                                                        bytes.size(), coding.decoded_bytes));
  }
  return DecodedChunk{bytes, is_shuffled};
}

}  // namespace bentlight::archive
