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
// Sums are put together in double and never by taking a small part from a large total: tilt can be a thousand
// times what is left without it.
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

/// The mean squares that given modes leave of frames without piston, tip and tilt.
///
/// Usually a difference of sums. Where the modes carry most of a frame, that would keep few digits of the
/// rest; the rest itself is then computed.
///
///   threads  one at a time
class ModalResidual {
 public:
  /// `basis` holds the summary modes (at least three) and outlives this object.
  explicit ModalResidual(const ModeBasis& basis) : basis_(&basis) {}

  /// Most frames that one call takes: with 36 modes of 128 x 128 points they fill a second-level cache.
  static constexpr std::size_t most_frames = 32;

  ///   shapes  frames [count][points]; mean_square, residual [count]; coefficients [modes beyond tilt, count]
  void residual(const float* frames,
                std::span<const double> mean_square,
                const Eigen::MatrixXd& coefficients,
                std::span<double> residual);

 private:
  const ModeBasis* basis_;
  Eigen::MatrixXf rest_;  // [points, count]
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
  void summarize_group(FrameBlock& block, FrameRange group, BlockSummary& summary);
  void remove_plane(FrameBlock& block, FrameRange group, BlockSummary& summary);

  const ModeBasis& basis_;
  MomentAccumulator moments_;
  ModalResidual modal_residual_;
  std::vector<double> plane_;     // [group][3]
  Eigen::MatrixXf products_;      // [modes, group]
  Eigen::MatrixXd coefficients_;  // [modes beyond tilt, group]
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

  /// `steady_lensing` is M, `mean_coefficients` [modes]; `basis` outlives this object.
  ///
  ///   errors  degenerate_aperture
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
      : preparation_(std::move(preparation)),
        modal_residual_(basis),
        mean_coefficients_(std::move(mean_coefficients)) {}

  FramePreparation preparation_;
  FramePreparation::Scratch scratch_;
  ModalResidual modal_residual_;
  std::vector<double> mean_coefficients_;  // [modes]
  Eigen::MatrixXd coefficients_;           // [modes beyond tilt, group]
};

/// Whether a summary of `modes` modes can give each frame's OPD_rms after `removal`.
bool summary_knows(const Removal& removal, std::size_t modes);

}  // namespace bentlight::optics
