// What indexing keeps of a view so that most questions never touch its frames again, and the arithmetic of it.
//
// Modes are orthonormal on the view's own aperture (optics/modes.h): mode 1 is piston, 2 tip (along x), 3 tilt (along
// y), the rest follow Noll's order. R is a frame with all summary modes taken out, V a frame with piston, tip and tilt
// taken out, M the mean of V over the whole record (the steady lensing). Orthonormality gives, for any set S of
// removed modes that holds piston or not:
//
//   mean square, `mean` kept      = residual(t) + sum over summary modes k not in S of c_k(t)^2
//   mean square, `mean` removed   = residual_fluctuation(t) + sum over k not in S of (c_k(t) - mean c_k)^2
//
// Sums are put together in double and never by taking a part from a large total: tilt can be a thousand times what is
// left without it.
#pragma once

#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

#include "optics/aperture.h"
#include "optics/frame_block.h"
#include "optics/modes.h"
#include "optics/moment_maps.h"

namespace bentlight::optics {

/// What one block of frames contributes; all in metres and metres squared.
struct BlockSummary {
  FrameRange frames;
  std::vector<double> coefficients;      // [modes][frames.count]
  std::vector<double> residual;          // [frames.count] mean square of R
  std::vector<double> tilt_removed;      // [frames.count] mean square of V
  std::vector<std::uint8_t> finite;      // [frames.count]; a frame that is not finite has zeros above
  MomentMaps maps;                       // of V, over the block's finite frames
};

/// First pass over a block. `basis` holds all summary modes of the block's aperture.
class BlockSummarizer {
 public:
  explicit BlockSummarizer(const ModeBasis& basis);
  BlockSummary summarize(const FrameBlock& block);

 private:
  const ModeBasis& basis_;
  std::vector<float> work_;
};

/// Second pass: mean squares about the steady lensing M [points], known once the first pass is over.
struct BlockFluctuation {
  std::vector<double> residual_fluctuation;      // [frames.count]
  std::vector<double> tilt_removed_fluctuation;  // [frames.count]
};
BlockFluctuation fluctuation(const FrameBlock& block,
                             const ModeBasis& basis,
                             std::span<const double> steady_lensing,
                             std::span<const double> mean_coefficients,
                             const BlockSummary& first_pass);

}  // namespace bentlight::optics
