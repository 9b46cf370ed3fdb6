// Frames on their way from the archive to an accumulator.
#pragma once

#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

namespace bentlight::optics {

struct FrameRange {
  std::size_t first = 0;
  std::size_t count = 0;
  std::size_t end() const { return first + count; }
  bool operator==(const FrameRange&) const = default;
};

/// Consecutive frames, only the points of an aperture, in metres.
///
/// A frame's value at a point is `values + shift_m`: the shift is the frame's value at its first point, taken
/// out in double before anything is rounded to float. A piston a thousand times the ripple then costs no
/// digits.
struct FrameBlock {
  FrameRange frames;
  std::size_t points = 0;
  std::vector<float> values;         // [frames.count][points]
  std::vector<double> shift_m;       // [frames.count]
  std::vector<std::uint8_t> finite;  // [frames.count]; 0 when a point of the frame is NaN or infinite

  /// Room for `count` frames; keeps its memory from call to call.
  void resize(FrameRange range, std::size_t point_count) {
    frames = range;
    points = point_count;
    values.resize(range.count * point_count);
    shift_m.resize(range.count);
    finite.resize(range.count);
  }
  std::span<const float> frame(std::size_t i) const { return {values.data() + i * points, points}; }
  std::span<float> frame(std::size_t i) { return {values.data() + i * points, points}; }
};

}  // namespace bentlight::optics
