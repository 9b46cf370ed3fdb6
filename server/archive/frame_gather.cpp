#include "archive/frame_gather.h"

#include <algorithm>
#include <bit>
#include <cmath>
#include <cstring>
#include <limits>
#include <type_traits>

namespace bentlight::archive {

namespace {

constexpr std::uint32_t infinity_bits = 0x7f800000;
constexpr std::uint32_t sign_bit = 0x80000000;

template <std::size_t bytes>
using Bits = std::
    conditional_t<bytes == 2, std::uint16_t, std::conditional_t<bytes == 4, std::uint32_t, std::uint64_t>>;

std::uint16_t swapped(std::uint16_t bits) {
  return __builtin_bswap16(bits);
}
std::uint32_t swapped(std::uint32_t bits) {
  return __builtin_bswap32(bits);
}
std::uint64_t swapped(std::uint64_t bits) {
  return __builtin_bswap64(bits);
}

/// The element at `place`, whatever its alignment.
template <class Element, bool swap>
Element load(const std::byte* place) {
  Bits<sizeof(Element)> bits;
  std::memcpy(&bits, place, sizeof bits);
  if constexpr (swap) bits = swapped(bits);
  return std::bit_cast<Element>(bits);
}

std::uint32_t magnitude_bits(float value) {
  return std::bit_cast<std::uint32_t>(value) & ~sign_bit;
}

struct Step {
  double shift;
  double metres_per_stored;
  double missing;  // used by WithMissing only
};

/// The difference of two floats, rounded once, is the difference in double rounded to float: a double holds
/// more than twice a float's digits (Figueroa, "When is double rounding innocuous?", SIGNUM Newsletter 30,
/// 1995). So metres stored as float32 need no double, and run twice as fast.
struct Difference {
  template <class Element>
  static float of(Element stored, const Step& step) {
    return static_cast<float>(stored) - static_cast<float>(step.shift);
  }
};

struct Scaled {
  template <class Element>
  static float of(Element stored, const Step& step) {
    return static_cast<float>((static_cast<double>(stored) - step.shift) * step.metres_per_stored);
  }
};

struct WithMissing {
  template <class Element>
  static float of(Element stored, const Step& step) {
    const double value = static_cast<double>(stored);
    const double metres = (value - step.shift) * step.metres_per_stored;
    return static_cast<float>(value == step.missing ? std::numeric_limits<double>::quiet_NaN() : metres);
  }
};

template <class Element, bool swap, class Rule>
struct Kernel {
  static std::uint32_t neighbours(const std::byte* in, std::size_t count, const Step& step, float* out) {
    std::uint32_t worst = 0;
    for (std::size_t i = 0; i < count; ++i) {
      out[i] = Rule::of(load<Element, swap>(in + i * sizeof(Element)), step);
      worst = std::max(worst, magnitude_bits(out[i]));
    }
    return worst;
  }

  static std::uint32_t strided(
      const std::byte* in, std::size_t stride_bytes, std::size_t count, const Step& step, float* out) {
    std::uint32_t worst = 0;
    for (std::size_t i = 0; i < count; ++i) {
      out[i] = Rule::of(load<Element, swap>(in + i * stride_bytes), step);
      worst = std::max(worst, magnitude_bits(out[i]));
    }
    return worst;
  }

  const Conversion& conversion;
  const Tile& tile;
  std::span<const RowSegment> segments;

  const std::byte* place(const RowSegment& segment) const {
    const std::size_t element = (segment.row - tile.first_row) * tile.row_stride +
                                (segment.column - tile.first_column) * tile.column_stride;
    return tile.data + element * sizeof(Element);
  }

  Step step(double shift) const {
    return {shift, conversion.metres_per_stored,
            conversion.missing.value_or(std::numeric_limits<double>::quiet_NaN())};
  }

  /// NaN when the frame has no value here.
  double first_finite(std::size_t frame) const {
    for (const RowSegment& segment : segments) {
      const std::byte* in = place(segment) + frame * tile.frame_stride * sizeof(Element);
      for (std::size_t i = 0; i < segment.count; ++i) {
        const auto value =
            static_cast<double>(load<Element, swap>(in + i * tile.column_stride * sizeof(Element)));
        if (std::isfinite(value) && value != conversion.missing) return value;
      }
    }
    return std::numeric_limits<double>::quiet_NaN();
  }

  void find_shifts(GatherState& state) const {
    for (std::size_t i = 0; i < tile.frames.count; ++i) {
      double& shift = state.stored_shift[tile.frames.first + i];
      if (std::isnan(shift)) shift = first_finite(i);
    }
  }

  /// Frame by frame: points of a row are neighbours, or nothing is.
  void by_frame(GatherState& state, optics::FrameBlock& block) const {
    for (std::size_t i = 0; i < tile.frames.count; ++i) {
      const std::size_t frame = tile.frames.first + i;
      const Step rule = step(state.stored_shift[frame]);
      float* out = block.values.data() + frame * block.points;
      std::uint32_t worst = state.worst[frame];
      for (const RowSegment& segment : segments) {
        const std::byte* in = place(segment) + i * tile.frame_stride * sizeof(Element);
        float* to = out + segment.point;
        worst = std::max(worst, tile.column_stride == 1 ? neighbours(in, segment.count, rule, to)
                                                        : strided(in, tile.column_stride * sizeof(Element),
                                                                  segment.count, rule, to));
      }
      state.worst[frame] = worst;
    }
  }

  /// Point by point: the frames of one point are neighbours.
  void by_point(GatherState& state, optics::FrameBlock& block) const {
    for (const RowSegment& segment : segments) {
      for (std::size_t k = 0; k < segment.count; ++k) {
        const std::byte* in = place(segment) + k * tile.column_stride * sizeof(Element);
        float* out = block.values.data() + tile.frames.first * block.points + segment.point + k;
        for (std::size_t i = 0; i < tile.frames.count; ++i) {
          const std::size_t frame = tile.frames.first + i;
          const float value =
              Rule::of(load<Element, swap>(in + i * sizeof(Element)), step(state.stored_shift[frame]));
          out[i * block.points] = value;
          state.worst[frame] = std::max(state.worst[frame], magnitude_bits(value));
        }
      }
    }
  }

  void run(GatherState& state, optics::FrameBlock& block) const {
    find_shifts(state);
    if (tile.frame_stride == 1 && tile.column_stride != 1) {
      by_point(state, block);
    } else {
      by_frame(state, block);
    }
  }
};

template <class Element, bool swap>
void gather_elements(const Conversion& conversion,
                     const Tile& tile,
                     std::span<const RowSegment> segments,
                     GatherState& state,
                     optics::FrameBlock& block) {
  if (conversion.missing) {
    Kernel<Element, swap, WithMissing>{conversion, tile, segments}.run(state, block);
  } else if (std::is_same_v<Element, float> && conversion.metres_per_stored == 1.0) {
    Kernel<Element, swap, Difference>{conversion, tile, segments}.run(state, block);
  } else {
    Kernel<Element, swap, Scaled>{conversion, tile, segments}.run(state, block);
  }
}

template <class Element>
void gather_ordered(const Conversion& conversion,
                    const Tile& tile,
                    std::span<const RowSegment> segments,
                    GatherState& state,
                    optics::FrameBlock& block) {
  if (conversion.big_endian == (std::endian::native == std::endian::big)) {
    gather_elements<Element, false>(conversion, tile, segments, state, block);
  } else {
    gather_elements<Element, true>(conversion, tile, segments, state, block);
  }
}

template <class Element>
std::vector<std::byte> encoded(double value, bool big_endian) {
  auto bits = std::bit_cast<Bits<sizeof(Element)>>(static_cast<Element>(value));
  if (big_endian != (std::endian::native == std::endian::big)) bits = swapped(bits);
  std::vector<std::byte> bytes(sizeof bits);
  std::memcpy(bytes.data(), &bits, sizeof bits);
  return bytes;
}

}  // namespace

std::vector<RowSegment> row_segments(const optics::Aperture& aperture) {
  std::vector<RowSegment> segments;
  segments.reserve(aperture.runs().size() + aperture.rows());
  const auto columns = static_cast<std::uint32_t>(aperture.columns());
  std::uint32_t point = 0;
  for (const optics::PointRun& run : aperture.runs()) {
    std::uint32_t first = run.first;
    const std::uint32_t end = run.first + run.count;
    while (first < end) {
      const std::uint32_t row = first / columns;
      const std::uint32_t count = std::min(end, (row + 1) * columns) - first;
      segments.push_back({.row = row, .column = first - row * columns, .count = count, .point = point});
      first += count;
      point += count;
    }
  }
  return segments;
}

void clip(std::span<const RowSegment> segments, const GridWindow& window, std::vector<RowSegment>& inside) {
  inside.clear();
  const auto first = std::partition_point(segments.begin(), segments.end(),
                                          [&](const RowSegment& s) { return s.row < window.first_row; });
  for (auto segment = first; segment != segments.end() && segment->row < window.end_row; ++segment) {
    const std::size_t begin = std::max<std::size_t>(segment->column, window.first_column);
    const std::size_t end = std::min<std::size_t>(segment->column + segment->count, window.end_column);
    if (begin >= end) continue;
    const auto skipped = static_cast<std::uint32_t>(begin - segment->column);
    inside.push_back({.row = segment->row,
                      .column = static_cast<std::uint32_t>(begin),
                      .count = static_cast<std::uint32_t>(end - begin),
                      .point = segment->point + skipped});
  }
}

Conversion conversion_of(const FrameMap& map) {
  return {.element = map.element,
          .big_endian = map.big_endian,
          .metres_per_stored = map.sign * map.scale * map.metres_per_unit,
          .metres_at_zero = map.sign * map.offset * map.metres_per_unit,
          .missing = map.missing};
}

std::size_t element_bytes(ElementType element) {
  switch (element) {
    case ElementType::int16:
      return 2;
    case ElementType::float32:
    case ElementType::int32:
      return 4;
    case ElementType::float64:
      return 8;
  }
  return 0;
}

std::vector<std::byte> stored_element(const Conversion& conversion, double value) {
  switch (conversion.element) {
    case ElementType::float32:
      return encoded<float>(value, conversion.big_endian);
    case ElementType::float64:
      return encoded<double>(value, conversion.big_endian);
    case ElementType::int16:
      return encoded<std::int16_t>(value, conversion.big_endian);
    case ElementType::int32:
      return encoded<std::int32_t>(value, conversion.big_endian);
  }
  return {};
}

void begin_gather(GatherState& state, std::size_t frames) {
  state.stored_shift.assign(frames, std::numeric_limits<double>::quiet_NaN());
  state.worst.assign(frames, 0);
}

void gather(const Conversion& conversion,
            const Tile& tile,
            std::span<const RowSegment> segments,
            GatherState& state,
            optics::FrameBlock& block) {
  switch (conversion.element) {
    case ElementType::float32:
      return gather_ordered<float>(conversion, tile, segments, state, block);
    case ElementType::float64:
      return gather_ordered<double>(conversion, tile, segments, state, block);
    case ElementType::int16:
      return gather_ordered<std::int16_t>(conversion, tile, segments, state, block);
    case ElementType::int32:
      return gather_ordered<std::int32_t>(conversion, tile, segments, state, block);
  }
}

void end_gather(const Conversion& conversion, const GatherState& state, optics::FrameBlock& block) {
  for (std::size_t i = 0; i < block.frames.count; ++i) {
    const double stored = state.stored_shift[i];
    // A frame without one finite value keeps no shift: all its points are NaN.
    block.shift_m[i] =
        std::isnan(stored) ? 0.0 : stored * conversion.metres_per_stored + conversion.metres_at_zero;
    block.finite[i] = state.worst[i] < infinity_bits ? 1 : 0;
  }
}

}  // namespace bentlight::archive
