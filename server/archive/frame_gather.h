// From stored elements in memory to an aperture's points in metres. Pure; the kernels of the reader.
#pragma once

#include <cstddef>
#include <cstdint>
#include <optional>
#include <span>
#include <vector>

#include "archive/wavefront_file.h"
#include "optics/aperture.h"
#include "optics/frame_block.h"

namespace bentlight::archive {

/// A stretch of an aperture's points within one row of the grid.
struct RowSegment {
  std::uint32_t row = 0;
  std::uint32_t column = 0;
  std::uint32_t count = 0;
  std::uint32_t point = 0;  // number of its first point
};

/// Rows and columns of the grid, ends not included.
struct GridWindow {
  std::size_t first_row = 0, end_row = 0;
  std::size_t first_column = 0, end_column = 0;
  bool holds(const RowSegment& segment) const {
    return segment.row >= first_row && segment.row < end_row && segment.column >= first_column &&
           segment.column < end_column;
  }
};

/// The runs of an aperture, cut where rows end; in point order.
std::vector<RowSegment> row_segments(const optics::Aperture& aperture);

/// What of `segments` lies inside `window`, in point order; `inside` keeps its memory from call to call.
void clip(std::span<const RowSegment> segments, const GridWindow& window, std::vector<RowSegment>& inside);

/// A box of stored elements. Strides are in elements; all zero for a box that holds one value everywhere.
struct Tile {
  const std::byte* data = nullptr;
  optics::FrameRange frames;  // numbered within the block that is filled
  std::size_t first_row = 0, first_column = 0;
  std::size_t frame_stride = 0, row_stride = 0, column_stride = 0;
};

/// How stored elements become metres; see FrameMap.
struct Conversion {
  ElementType element = ElementType::float32;
  bool big_endian = false;
  double metres_per_stored = 1.0;  // sign * scale * metres_per_unit
  double metres_at_zero = 0.0;     // sign * offset * metres_per_unit
  std::optional<double> missing;
};

Conversion conversion_of(const FrameMap& map);
std::size_t element_bytes(ElementType element);

/// `value` as one stored element, in the byte order of `conversion`.
///
///   needs  a value that the element type can hold (verify.h sees to it)
std::vector<std::byte> stored_element(const Conversion& conversion, double value);

/// A block on its way: which stored value each frame is shifted by is known once one of its points has been
/// seen.
struct GatherState {
  std::vector<double> stored_shift;  // [frames]; NaN until known
  std::vector<std::uint32_t>
      worst;  // [frames] greatest bits of a value without its sign: beyond those of infinity, NaN
};

void begin_gather(GatherState& state, std::size_t frames);

/// Writes the points of `segments` for all frames of `tile` into `block`. A frame without a shift takes the
/// first finite value among them.
void gather(const Conversion& conversion,
            const Tile& tile,
            std::span<const RowSegment> segments,
            GatherState& state,
            optics::FrameBlock& block);

/// Sets the block's shifts and flags, once all tiles are gathered.
void end_gather(const Conversion& conversion, const GatherState& state, optics::FrameBlock& block);

}  // namespace bentlight::archive
