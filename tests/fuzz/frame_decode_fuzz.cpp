// Feeds chunks of any bytes, coded in any way, to the decoder and the gathering of points. Whatever comes,
// the answer is elements of the right number or a refusal.
#include <algorithm>
#include <cstddef>
#include <cstdint>
#include <cstdlib>
#include <span>
#include <vector>

#include "archive/frame_decode.h"
#include "archive/frame_gather.h"
#include "archive/verify.h"

namespace {

using namespace bentlight;

/// The first bytes of the input choose the coding, the rest is the chunk.
struct Choice {
  archive::FrameMap map;
  std::uint32_t filter_mask;
};

Choice chosen(std::span<const std::uint8_t, 8> bytes) {
  Choice choice;
  archive::FrameMap& map = choice.map;
  map.element = static_cast<archive::ElementType>(bytes[0] % 4);
  map.big_endian = (bytes[0] & 4) != 0;
  map.scale = (bytes[0] & 8) != 0 ? 1.0 : 1e-6;
  if ((bytes[0] & 16) != 0) map.missing = 0.0;
  map.chunk_shape = {1U + bytes[1] % 7, 1U + bytes[2] % 9, 1U + bytes[3] % 9};
  map.shape = map.chunk_shape;
  for (std::size_t i = 0; i < bytes[4] % 4U; ++i) {
    map.filters.push_back(static_cast<archive::Filter>((bytes[5] >> 2 * i) % 3));
  }
  choice.filter_mask = bytes[6] % 8;
  return choice;
}

void gather_all(const archive::FrameMap& map, std::span<const std::byte> elements) {
  const auto frames = static_cast<std::size_t>(map.frames()),
             points = static_cast<std::size_t>(map.rows() * map.columns());
  std::vector<archive::RowSegment> segments;
  for (std::uint32_t row = 0; row < map.rows(); ++row) {
    const auto columns = static_cast<std::uint32_t>(map.columns());
    segments.push_back({.row = row, .column = 0, .count = columns, .point = row * columns});
  }
  optics::FrameBlock block;
  block.resize({0, frames}, points);
  archive::GatherState state;
  archive::begin_gather(state, frames);
  const archive::Tile tile{.data = elements.data(),
                           .frames = {0, frames},
                           .frame_stride = points,
                           .row_stride = static_cast<std::size_t>(map.columns()),
                           .column_stride = 1};
  archive::gather(archive::conversion_of(map), tile, segments, state, block);
  archive::end_gather(archive::conversion_of(map), state, block);
}

}  // namespace

extern "C" int LLVMFuzzerTestOneInput(const std::uint8_t* data, std::size_t bytes) {
  if (bytes < 8) return 0;
  const auto [map, filter_mask] = chosen(std::span<const std::uint8_t, 8>(data, 8));
  if (std::ranges::count(map.filters, archive::Filter::deflate) > 1) return 0;  // verify() refuses those
  const std::size_t element_bytes = archive::element_bytes(map.element);
  const archive::ChunkCoding coding{
      .filters = map.filters,
      .element_bytes = element_bytes,
      .decoded_bytes = static_cast<std::size_t>(map.shape[0] * map.shape[1] * map.shape[2]) * element_bytes};

  archive::DecodeScratch scratch;
  const auto decoded =
      archive::decode_chunk(coding, filter_mask, std::as_bytes(std::span(data + 8, bytes - 8)), scratch);
  if (!decoded) return 0;
  if (decoded->bytes.size() != coding.decoded_bytes) std::abort();
  std::vector<std::byte> elements(decoded->bytes.begin(), decoded->bytes.end());
  if (decoded->is_shuffled) archive::unshuffle(decoded->bytes, element_bytes, 0, elements);
  gather_all(map, elements);
  return 0;
}
