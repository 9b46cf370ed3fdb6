#include "archive/frame_decode.h"

#include <fmt/format.h>
#include <libdeflate.h>

#include <algorithm>
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
void unshuffle_elements(const std::byte* in, std::byte* out, std::size_t elements) {
  for (std::size_t i = 0; i < elements; ++i) {
    for (std::size_t k = 0; k < element_bytes; ++k) out[i * element_bytes + k] = in[k * elements + i];
  }
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
  const auto word = [&](std::size_t i) {
    return std::to_integer<std::uint32_t>(bytes[2 * i]) << 8 |
           std::to_integer<std::uint32_t>(bytes[2 * i + 1]);
  };
  // Over a block of n words the second sum grows by n times the first and by the words weighted n … 1. With
  // blocks of 4096 words neither product leaves 64 bits, and both loops run in vector registers.
  constexpr std::size_t block = 4096;
  const std::size_t words = bytes.size() / 2;
  std::uint64_t sum1 = 0, sum2 = 0;
  for (std::size_t first = 0; first < words; first += block) {
    const std::size_t count = std::min(block, words - first);
    std::uint64_t plain = 0, weighted = 0;
    for (std::size_t i = 0; i < count; ++i) {
      plain += word(first + i);
      weighted += std::uint64_t{word(first + i)} * (count - i);
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

void unshuffle(std::span<const std::byte> in, std::span<std::byte> out, std::size_t element_bytes) {
  const std::size_t elements = in.size() / element_bytes;
  switch (element_bytes) {
    case 2:
      unshuffle_elements<2>(in.data(), out.data(), elements);
      break;
    case 4:
      unshuffle_elements<4>(in.data(), out.data(), elements);
      break;
    case 8:
      unshuffle_elements<8>(in.data(), out.data(), elements);
      break;
    default:
      throw std::invalid_argument("unshuffle: no element type has this size");
  }
  const std::size_t whole = elements * element_bytes;
  std::copy(in.begin() + static_cast<std::ptrdiff_t>(whole), in.end(),
            out.begin() + static_cast<std::ptrdiff_t>(whole));
}

Expected<std::span<const std::byte>> decode_chunk(const ChunkCoding& coding,
                                                  std::uint32_t filter_mask,
                                                  std::span<const std::byte> stored,
                                                  DecodeScratch& scratch) {
  std::span<const std::byte> bytes = stored;
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
        out.resize(bytes.size());
        unshuffle(bytes, out, coding.element_bytes);
        bytes = out;
        break;
    }
  }
  if (bytes.size() != coding.decoded_bytes) {
    return failure(ErrorCode::damaged_file, fmt::format("a chunk decodes to {} bytes instead of {}",
                                                        bytes.size(), coding.decoded_bytes));
  }
  return bytes;
}

}  // namespace bentlight::archive
