// Preparing frames: taking modes and the steady lensing out, in place.
#pragma once

#include <Eigen/Core>
#include <array>
#include <span>
#include <vector>

#include "base/error.h"
#include "optics/aperture.h"
#include "optics/frame_block.h"
#include "optics/modes.h"
#include "optics/removal.h"

namespace bentlight::optics {

/// What has to be done to each frame of one aperture, worked out once.
///
/// Piston, tip and tilt go first, by sums that go over to double: they are often a thousand times what is
/// left. Higher modes then follow as a matrix product in float, on what is small. All modes being
/// orthonormal, the order makes no other difference.
///
///   threads  const afterwards: prepare() from any thread, each with a Scratch of its own
///   source   least squares on an orthonormal basis, as in Noll (1976)
///   cost     piston, tip, tilt and mean: twice through the frames, the second time in cache; each higher
///            mode four operations a point
class FramePreparation {
 public:
  struct Scratch {
    std::vector<double> mean_square;  // [frames], m2, of the prepared block; NaN where not finite
    std::vector<float> lift;
    Eigen::MatrixXf coefficients;
  };

  /// `mean` [points] is the time mean of raw frames, in metres, for a removal that holds it; otherwise empty.
  /// The modes of the removal are taken out of it here: both operations commute.
  ///
  ///   errors  degenerate_aperture
  ///   throws  std::invalid_argument when the mean is missing, not wanted, or of another length
  static Expected<FramePreparation> make(const Aperture& aperture,
                                         const Removal& removal,
                                         std::span<const double> mean);

  /// In place: the block's values become the prepared frames in metres, its shifts zero. Frames that are not
  /// finite become zeros and keep their flag.
  ///
  ///   throws  std::invalid_argument when the block has other points than the aperture
  void prepare(FrameBlock& block, Scratch& scratch) const;

 private:
  void remove_plane(FrameBlock& block, Scratch& scratch) const;
  void remove_higher_modes(FrameBlock& block, Scratch& scratch) const;

  std::array<bool, 3> takes_ = {};                  // piston, tip, tilt
  std::vector<float> tip_, tilt_;                   // [points], for sums
  std::vector<double> tip_exactly_, tilt_exactly_;  // [points], to subtract
  Eigen::MatrixXf higher_;                          // [points, removed modes beyond tilt]
  std::vector<float> center_;                       // [points] or empty; without piston
  double center_piston_m_ = 0.0;                    // zero where piston is removed
};

/// Mean over points of each frame times each of the first `modes` modes of `basis`: [modes][frames], in
/// metres; NaN for a frame that is not finite. The shift counts into piston.
std::vector<double> mode_coefficients(const FrameBlock& block, const ModeBasis& basis, std::size_t modes);

}  // namespace bentlight::optics
