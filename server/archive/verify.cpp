#include "archive/verify.h"

#include <fmt/format.h>

#include <algorithm>
#include <bit>
#include <cmath>
#include <limits>
#include <span>
#include <string>

#include "archive/frame_gather.h"
#include "base/limits.h"

namespace bentlight::archive {

namespace {

// Deflate makes at most 1032 bytes of one (zlib's technical notes, from memory). A dataset beyond that is
// nearly all fill value, and reading it would take for ever.
constexpr std::uint64_t most_bytes_of_one = 1100;

bool multiply(std::uint64_t a, std::uint64_t b, std::uint64_t& product) {
  return !__builtin_mul_overflow(a, b, &product);
}

/// The bytes of a box of elements; failed when no 64 bits hold them.
Expected<std::uint64_t> box_bytes(const std::array<std::uint64_t, 3>& extent, ElementType element) {
  std::uint64_t bytes = element_bytes(element);
  for (const std::uint64_t count : extent) {
    if (!multiply(bytes, count, bytes)) {
      return failure(ErrorCode::too_large,
                     fmt::format("a shape of {} x {} x {} has more bytes than can be counted", extent[0],
                                 extent[1], extent[2]));
    }
  }
  return bytes;
}

Expected<void> verify_shape(const FrameMap& map) {
  std::array<int, 3> sorted = map.axes;
  std::ranges::sort(sorted);
  if (sorted != std::array<int, 3>{0, 1, 2}) {
    return failure(ErrorCode::layout_mismatch, fmt::format("axes {}, {}, {} are not an order of 0, 1, 2",
                                                           map.axes[0], map.axes[1], map.axes[2]));
  }
  for (const std::uint64_t extent : map.shape) {
    if (extent == 0) {
      return failure(ErrorCode::layout_mismatch,
                     fmt::format("the dataset's shape is {} x {} x {}: it holds no frame", map.shape[0],
                                 map.shape[1], map.shape[2]));
    }
  }
  std::uint64_t points = 0;
  if (!multiply(map.rows(), map.columns(), points) || points > limits::grid_points) {
    return failure(ErrorCode::too_large, fmt::format("frames of {} x {} points; at most {} points are read",
                                                     map.rows(), map.columns(), limits::grid_points));
  }
  if (map.frames() > limits::frames) {
    return failure(ErrorCode::too_large,
                   fmt::format("{} frames; at most {} are read", map.frames(), limits::frames));
  }
  return {};
}

template <class Integer>
bool is_held(double value) {
  return value >= std::numeric_limits<Integer>::min() && value <= std::numeric_limits<Integer>::max();
}

Expected<void> verify_values(const FrameMap& map) {
  if (!std::isfinite(map.scale) || map.scale == 0.0 || !std::isfinite(map.offset) ||
      !std::isfinite(map.metres_per_unit) || map.metres_per_unit <= 0.0 ||
      (map.sign != 1 && map.sign != -1)) {
    return failure(ErrorCode::layout_mismatch,
                   fmt::format("scale {}, offset {}, {} metres per unit and sign {} do not make metres",
                               map.scale, map.offset, map.metres_per_unit, map.sign));
  }
  if ((map.element == ElementType::int16 && !is_held<std::int16_t>(map.fill_value)) ||
      (map.element == ElementType::int32 && !is_held<std::int32_t>(map.fill_value))) {
    return failure(ErrorCode::damaged_file,
                   fmt::format("the fill value {} is none of the element's values", map.fill_value));
  }
  return {};
}

Expected<void> verify_inside(std::uint64_t offset,
                             std::uint64_t bytes,
                             std::uint64_t file_bytes,
                             const std::string& what) {
  if (offset > file_bytes || bytes > file_bytes - offset) {
    return failure(ErrorCode::damaged_file,
                   fmt::format("{} ({} bytes at {}) lies beyond the end of the file ({} bytes)", what, bytes,
                               offset, file_bytes));
  }
  return {};
}

Expected<void> verify_filters(const FrameMap& map) {
  if (map.filters.size() > limits::filters) {
    return failure(ErrorCode::unsupported_storage,
                   fmt::format("{} filters; at most {} are undone", map.filters.size(), limits::filters));
  }
  if (std::ranges::count(map.filters, Filter::deflate) > 1) {
    return failure(ErrorCode::unsupported_storage, "deflated twice: the size between is not known");
  }
  return {};
}

/// How many chunks the shape takes, and each one's decoded bytes.
struct ChunkCounts {
  std::uint64_t chunks = 1;
  std::uint64_t decoded_bytes = 0;
};

Expected<ChunkCounts> chunk_counts(const FrameMap& map) {
  ChunkCounts counts;
  for (std::size_t axis = 0; axis < 3; ++axis) {
    const std::uint64_t extent = map.chunk_shape[axis];
    // The library keeps chunk extents in 32 bits; within that, rounding the shape up cannot overflow.
    if (extent == 0 || extent > std::numeric_limits<std::uint32_t>::max()) {
      return failure(ErrorCode::damaged_file, fmt::format("a chunk extends over {} elements", extent));
    }
    const std::uint64_t along = (map.shape[axis] - 1) / extent + 1;
    if (!multiply(counts.chunks, along, counts.chunks) || counts.chunks > limits::chunks) {
      return failure(ErrorCode::too_large, fmt::format("more than {} chunks", limits::chunks));
    }
  }
  const auto bytes = box_bytes(map.chunk_shape, map.element);
  if (!bytes) return failure(bytes);
  if (!map.filters.empty() && *bytes > limits::chunk_bytes) {
    return failure(ErrorCode::too_large,
                   fmt::format("chunks of {} bytes; at most {} are read", *bytes, limits::chunk_bytes));
  }
  counts.decoded_bytes = *bytes;
  return counts;
}

Expected<void> verify_chunk(const FrameMap& map,
                            std::size_t number,
                            std::uint64_t decoded_bytes,
                            std::uint64_t file_bytes) {
  const Chunk& chunk = map.chunks[number];
  if (chunk.bytes == 0) return {};
  if (auto inside = verify_inside(chunk.offset, chunk.bytes, file_bytes, fmt::format("chunk {}", number));
      !inside) {
    return inside;
  }
  const std::uint32_t applied = (1U << map.filters.size()) - 1;
  const bool is_plain = (chunk.filter_mask & applied) == applied;
  if (is_plain && chunk.bytes != decoded_bytes) {
    return failure(ErrorCode::damaged_file,
                   fmt::format("chunk {} has {} bytes instead of {}", number, chunk.bytes, decoded_bytes));
  }
  // Filters may add a little to what they cannot compress; more than this is no chunk but a claim on memory.
  if (chunk.bytes > 2 * decoded_bytes + 64 * limits::kibi) {
    return failure(ErrorCode::damaged_file, fmt::format("chunk {} has {} stored bytes for {} decoded", number,
                                                        chunk.bytes, decoded_bytes));
  }
  return {};
}

Expected<void> verify_storage(const FrameMap& map, std::uint64_t file_bytes) {
  const auto whole_bytes = box_bytes(map.shape, map.element);
  if (!whole_bytes) return failure(whole_bytes);
  if (map.storage == Storage::contiguous) {
    return verify_inside(map.data_offset, *whole_bytes, file_bytes, "the dataset");
  }
  if (*whole_bytes / most_bytes_of_one > file_bytes) {
    return failure(ErrorCode::too_large, fmt::format("{} bytes of frames are claimed for a file of {} bytes",
                                                     *whole_bytes, file_bytes));
  }
  if (auto filters = verify_filters(map); !filters) return filters;
  const auto counts = chunk_counts(map);
  if (!counts) return failure(counts);
  if (map.chunks.size() != counts->chunks) {
    return failure(ErrorCode::damaged_file, fmt::format("{} chunks are known where the shape takes {}",
                                                        map.chunks.size(), counts->chunks));
  }
  for (std::size_t i = 0; i < map.chunks.size(); ++i) {
    if (auto chunk = verify_chunk(map, i, counts->decoded_bytes, file_bytes); !chunk) return chunk;
  }
  return {};
}

Expected<void> verify_coordinates(std::span<const double> values, std::size_t count, std::string_view axis) {
  if (values.size() != count) {
    return failure(
        ErrorCode::layout_mismatch,
        fmt::format("{} has {} coordinates where the frames have {} points", axis, values.size(), count));
  }
  for (std::size_t i = 0; i < count; ++i) {
    if (!std::isfinite(values[i]) || (i > 0 && values[i] <= values[i - 1])) {
      return failure(
          ErrorCode::layout_mismatch,
          fmt::format("{} must rise from point to point; coordinate {} is {}", axis, i, values[i]));
    }
  }
  return {};
}

Expected<void> verify_grid(const WavefrontFile& file) {
  const optics::Grid& grid = file.grid;
  if (grid.rows != file.map.rows() || grid.columns != file.map.columns() ||
      grid.mask.size() != grid.rows * grid.columns) {
    return failure(ErrorCode::layout_mismatch,
                   fmt::format("a grid of {} x {} with {} mask points for frames of {} x {}", grid.rows,
                               grid.columns, grid.mask.size(), file.map.rows(), file.map.columns()));
  }
  if (auto x = verify_coordinates(grid.x_m, grid.columns, "x"); !x) return x;
  return verify_coordinates(grid.y_m, grid.rows, "y");
}

Expected<void> verify_times(const WavefrontFile& file) {
  const std::vector<double>& times = file.time_s;
  if (!std::isfinite(file.frame_rate_hz) || file.frame_rate_hz < 0.0 ||
      (file.frame_rate_hz == 0.0 && file.map.frames() > 1)) {
    return failure(ErrorCode::layout_mismatch, fmt::format("a frame rate of {} Hz", file.frame_rate_hz));
  }
  if (times.empty()) return {};
  if (times.size() != file.map.frames()) {
    return failure(ErrorCode::layout_mismatch,
                   fmt::format("{} time stamps for {} frames", times.size(), file.map.frames()));
  }
  for (std::size_t i = 0; i < times.size(); ++i) {
    if (!std::isfinite(times[i])) {
      return failure(ErrorCode::layout_mismatch,
                     fmt::format("the time stamp of frame {} is {}", i, times[i]));
    }
    if (i > 0 && times[i] < times[i - 1]) {
      return failure(
          ErrorCode::layout_mismatch,
          fmt::format("time goes backwards at frame {}: {} s after {} s", i, times[i], times[i - 1]));
    }
  }
  return {};
}

}  // namespace

Expected<void> verify(const FrameMap& map, std::uint64_t file_bytes) {
  if (auto shape = verify_shape(map); !shape) return shape;
  if (auto values = verify_values(map); !values) return values;
  return verify_storage(map, file_bytes);
}

Expected<void> verify(const WavefrontFile& file) {
  if (auto map = verify(file.map, file.identity.stamp.size_bytes); !map) return map;
  if (auto grid = verify_grid(file); !grid) return grid;
  if (auto times = verify_times(file); !times) return times;
  for (const Signal& signal : file.signals) {
    if (signal.values.size() != file.map.frames()) {
      return failure(ErrorCode::layout_mismatch,
                     fmt::format("signal '{}' has {} values for {} frames", signal.name, signal.values.size(),
                                 file.map.frames()));
    }
  }
  return {};
}

}  // namespace bentlight::archive
