// What indexing keeps of a view so that most questions never touch its frames again, and the arithmetic of
// it.
//
// Modes are orthonormal on the view's own aperture (optics/modes.h). R is a frame with all summary modes
// taken out, V a frame with piston, tip and tilt taken out, M the mean of V over the whole record (the steady
// lensing beyond tilt). Orthonormality gives, for any set S of removed modes among the summary modes:
//
//   mean square, `mean` kept     = residual(t) + sum over summary modes k not in S of c_k(t)^2
//   mean square, `mean` removed  = residual_fluctuation(t) + sum over k not in S of (c_k(t) - mean c_k)^2
//
// Sums are put together in double and never by taking a part from a large total: tilt can be a thousand times
// what is left without it.
#pragma once

#include <Eigen/Core>
#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

#include "base/error.h"
#include "optics/aperture.h"
#include "optics/frame_block.h"
#include "optics/modes.h"
#include "optics/moment_maps.h"
#include "optics/preparation.h"
#include "optics/removal.h"

namespace bentlight::optics {

/// What one block of frames contributes; metres and metres squared. A frame that is not finite has zeros.
struct BlockSummary {
  FrameRange frames;
  std::vector<double> coefficients;  // [modes][frames.count]
  std::vector<double> residual;      // [frames.count]; mean square of R
  std::vector<double> tilt_removed;  // [frames.count]; mean square of V
  std::vector<std::uint8_t> finite;  // [frames.count]
  MomentMaps maps;                   // of V, over the block's finite frames
};

/// First pass: everything but what needs the mean of the whole record.
///
///   threads  one at a time; one object per lane
class BlockSummarizer {
 public:
  /// `basis` holds the summary modes (at least three) and outlives this object.
  explicit BlockSummarizer(const ModeBasis& basis);

  /// Summarises a block; the block's values become V, its shifts zero.
  BlockSummary summarize(FrameBlock& block);

 private:
  const ModeBasis& basis_;
  MomentAccumulator moments_;
  std::vector<double> sums_;
  std::vector<float> plane_;
  Eigen::MatrixXf products_;
};

/// Second pass: mean squares about the steady lensing.
///
///   threads  one at a time; one object per lane
class BlockFluctuation {
 public:
  struct Values {
    std::vector<double> residual;      // [frames.count]; mean square of R minus its mean over the record
    std::vector<double> tilt_removed;  // [frames.count]; mean square of V - M
  };

  /// `steady_lensing` is M, `mean_coefficients` [modes]. errors  degenerate_aperture
  static Expected<BlockFluctuation> make(const Aperture& aperture,
                                         const ModeBasis& basis,
                                         std::span<const double> steady_lensing,
                                         std::span<const double> mean_coefficients);

  /// `coefficients` [modes][frames.count] as the first pass gave them. Takes raw frames or V, and changes
  /// them.
  Values add(FrameBlock& block, std::span<const double> coefficients);

 private:
  BlockFluctuation(const ModeBasis& basis,
                   FramePreparation preparation,
                   std::vector<double> mean_coefficients)
      : basis_(&basis),
        preparation_(std::move(preparation)),
        mean_coefficients_(std::move(mean_coefficients)) {}

  const ModeBasis* basis_;
  FramePreparation preparation_;
  FramePreparation::Scratch scratch_;
  std::vector<double> mean_coefficients_;
};

/// Whether a summary of `modes` modes can give each frame's OPD_rms after `removal`.
bool summary_knows(const Removal& removal, std::size_t modes);

}  // namespace bentlight::optics
