// Preparing frames: taking modes and the steady lensing out, in place.
#pragma once

#include <Eigen/Core>
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
///   threads  const afterwards: prepare() from any thread, each with a Scratch of its own
///   source   least squares on an orthonormal basis, as in Noll (1976)
class FramePreparation {
 public:
  struct Scratch {
    std::vector<double>
        mean_square;  // [frames] of the prepared block, m2; NaN for a frame that is not finite
    std::vector<double> sums;
    std::vector<float> plane;
    Eigen::MatrixXf coefficients;
  };

  /// `mean` [points] is the time mean of raw frames, in metres, for a removal that holds it; otherwise empty.
  /// The modes of the removal are taken out of it here: both operations commute.
  ///
  ///   errors  degenerate_aperture
  static Expected<FramePreparation> make(const Aperture& aperture,
                                         const Removal& removal,
                                         std::span<const double> mean);

  /// In place: the block's values become the prepared frames in metres, its shifts zero. Frames that are not
  /// finite become zeros and keep their flag.
  void prepare(FrameBlock& block, Scratch& scratch) const;

 private:
  void remove_plane(FrameBlock& block, Scratch& scratch) const;
  void remove_modes(FrameBlock& block, Scratch& scratch) const;

  bool is_plane_ = false;
  bool keeps_piston_ = false;
  Eigen::MatrixXf modes_;      // [points, removed]
  std::vector<float> center_;  // [points] or empty
};

/// Mean over points of each frame times each of the first `modes` modes of `basis`: [modes][frames], in
/// metres. The shift counts into piston.
std::vector<double> mode_coefficients(const FrameBlock& block, const ModeBasis& basis, std::size_t modes);

}  // namespace bentlight::optics
