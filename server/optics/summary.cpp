#include "optics/summary.h"

#include <algorithm>
#include <array>

#include "optics/frame_kernels.h"

namespace bentlight::optics {

namespace {

constexpr std::size_t plane_modes = 3;

// Frames to one matrix product: 32 frames of 128 x 128 and 36 modes fill a second-level cache (tests/bench,
// index).
constexpr std::size_t product_frames = 32;

// Below this share of V, the residual as a difference of sums has lost the digits of its floats; it is then
// computed from the residual itself.
constexpr double least_share = 1e-3;

/// Mean square of `frame` - sum of c_k Z_k over the modes beyond the plane, from the difference itself.
double direct_residual(std::span<const float> frame, const ModeBasis& basis, std::span<const double> c) {
  const auto points = static_cast<Eigen::Index>(frame.size());
  Eigen::VectorXd left = Eigen::Map<const Eigen::VectorXf>(frame.data(), points).cast<double>();
  for (std::size_t k = plane_modes; k < basis.count(); ++k) {
    left -= c[k - plane_modes] * basis.modes().col(static_cast<Eigen::Index>(k));
  }
  return left.squaredNorm() / static_cast<double>(points);
}

/// Mean square of what the modes beyond the plane, with coefficients c, leave of a frame whose mean square is
/// `all`.
double residual_of(std::span<const float> frame,
                   double all,
                   const ModeBasis& basis,
                   std::span<const double> c) {
  double modal = 0.0;
  for (const double value : c) modal += value * value;
  return modal < (1.0 - least_share) * all || all == 0.0 ? all - modal : direct_residual(frame, basis, c);
}

}  // namespace

BlockSummarizer::BlockSummarizer(const ModeBasis& basis) : basis_(basis), moments_(basis.points()) {}

BlockSummary BlockSummarizer::summarize(FrameBlock& block) {
  const std::size_t frames = block.frames.count, modes = basis_.count(), points = block.points;
  const double scale = 1.0 / static_cast<double>(points);
  BlockSummary summary{.frames = block.frames,
                       .coefficients = std::vector<double>(modes * frames, 0.0),
                       .residual = std::vector<double>(frames, 0.0),
                       .tilt_removed = std::vector<double>(frames, 0.0),
                       .finite = block.finite};
  sums_.resize(3 * product_frames);
  plane_.resize(3 * product_frames);
  std::vector<double> higher(modes - plane_modes);
  for (std::size_t first = 0; first < frames; first += product_frames) {
    const std::size_t count = std::min(product_frames, frames - first);
    float* const values = block.frame(first).data();
    for (std::size_t f = 0; f < count; ++f) {
      if (!block.finite[first + f]) std::ranges::fill(block.frame(first + f), 0.0F);
    }
    plane_sums(values, count, points, basis_.mode_float(2).data(), basis_.mode_float(3).data(), sums_.data());
    for (std::size_t i = 0; i < 3 * count; ++i) plane_[i] = static_cast<float>(sums_[i] * scale);
    subtract_plane(values, count, points, basis_.mode_float(2).data(), basis_.mode_float(3).data(), nullptr,
                   plane_.data(), summary.tilt_removed.data() + first);

    const Eigen::Map<const Eigen::MatrixXf> columns(values, static_cast<Eigen::Index>(points),
                                                    static_cast<Eigen::Index>(count));
    products_.noalias() = basis_.modes_float().transpose() * columns;
    for (std::size_t f = 0; f < count; ++f) {
      const std::size_t frame = first + f;
      if (!block.finite[frame]) continue;
      const auto column = static_cast<Eigen::Index>(f);
      summary.tilt_removed[frame] *= scale;
      for (std::size_t k = 0; k < modes; ++k) {
        const double product = static_cast<double>(products_(static_cast<Eigen::Index>(k), column)) * scale;
        // What rounding left of the plane belongs to it; piston holds the shift.
        const double plane = k < plane_modes ? static_cast<double>(plane_[3 * f + k]) : 0.0;
        summary.coefficients[k * frames + frame] = product + plane + (k == 0 ? block.shift_m[frame] : 0.0);
        if (k >= plane_modes) higher[k - plane_modes] = product;
      }
      summary.residual[frame] = residual_of(block.frame(frame), summary.tilt_removed[frame], basis_, higher);
    }
  }
  std::ranges::fill(block.shift_m, 0.0);
  moments_.add(block);
  summary.maps = moments_.finish();
  return summary;
}

Expected<BlockFluctuation> BlockFluctuation::make(const Aperture& aperture,
                                                  const ModeBasis& basis,
                                                  std::span<const double> steady_lensing,
                                                  std::span<const double> mean_coefficients) {
  auto preparation = FramePreparation::make(aperture, {.mean = true, .modes = {1, 2, 3}}, steady_lensing);
  if (!preparation) return failure(preparation);
  return BlockFluctuation(basis, std::move(*preparation),
                          {mean_coefficients.begin(), mean_coefficients.end()});
}

BlockFluctuation::Values BlockFluctuation::add(FrameBlock& block, std::span<const double> coefficients) {
  const std::size_t frames = block.frames.count, modes = basis_->count();
  preparation_.prepare(block, scratch_);
  Values values{.residual = std::vector<double>(frames, 0.0),
                .tilt_removed = std::vector<double>(frames, 0.0)};
  std::vector<double> higher(modes - plane_modes);
  for (std::size_t f = 0; f < frames; ++f) {
    if (!block.finite[f]) continue;
    for (std::size_t k = plane_modes; k < modes; ++k) {
      higher[k - plane_modes] = coefficients[k * frames + f] - mean_coefficients_[k];
    }
    values.tilt_removed[f] = scratch_.mean_square[f];
    values.residual[f] = residual_of(block.frame(f), scratch_.mean_square[f], *basis_, higher);
  }
  return values;
}

bool summary_knows(const Removal& removal, std::size_t modes) {
  return removal.highest_mode() <= modes;
}

}  // namespace bentlight::optics
