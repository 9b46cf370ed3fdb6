// Mean and spread at every point over time, in a form that merges.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

#include "optics/frame_block.h"

namespace bentlight::optics {

/// Count, mean and sum of squared deviations at every point.
///
///   source  merging after Chan, Golub and LeVeque, The American Statistician 37 (1983) 242, and Pébay,
///           SAND2008-6212
struct MomentMaps {
  std::size_t count = 0;     // frames
  std::vector<double> mean;  // [points]
  std::vector<double> m2;    // [points]; sum over frames of (value - mean)^2

  static MomentMaps of(std::size_t points) {
    return {.mean = std::vector<double>(points, 0.0), .m2 = std::vector<double>(points, 0.0)};
  }

  /// Takes in the frames of `other`, as if all had been added to one.
  void merge(const MomentMaps& other);

  /// Root mean square about `center` [points] (divisor count); about zero when `center` is empty.
  std::vector<double> rms_about(std::span<const double> center) const;
};

/// Adds frames to moments. Sums run in float about a pilot, the first frame of each batch, and go over to
/// double after a few dozen frames: fast, and no digits are lost when the mean is large against the spread.
///
///   threads  one at a time
class MomentAccumulator {
 public:
  explicit MomentAccumulator(std::size_t points) : maps_(MomentMaps::of(points)) {}

  /// Adds the finite frames of a prepared block (its shift is zero).
  void add(const FrameBlock& block);

  /// All that was added. The accumulator is empty after this.
  MomentMaps finish();

 private:
  void add_run(const FrameBlock& block, std::size_t first, std::size_t count);
  void settle();

  MomentMaps maps_;
  std::vector<float> pilot_, sum_, squares_;  // [points], of the frames not settled yet
  std::size_t unsettled_ = 0;
};

}  // namespace bentlight::optics
