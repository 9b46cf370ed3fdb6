#include "optics/summary.h"

#include <algorithm>
#include <array>

#include "optics/frame_kernels.h"

namespace bentlight::optics {

namespace {

constexpr std::size_t plane_modes = 3;

// Below this share of the mean square, the rest as a difference of sums has lost too many of the digits that
// the float products hold (about 1e-7 of the whole, so 1e-6 of a tenth).
constexpr double least_share = 0.1;

}  // namespace

void ModalResidual::residual(const float* frames,
                             std::span<const double> mean_square,
                             const Eigen::MatrixXd& coefficients,
                             std::span<double> residual) {
  const auto points = static_cast<Eigen::Index>(basis_->points());
  const auto count = static_cast<Eigen::Index>(mean_square.size());
  std::array<bool, most_frames> is_short = {};
  bool any_is_short = false;
  for (std::size_t f = 0; f < mean_square.size(); ++f) {
    const double modal = coefficients.col(static_cast<Eigen::Index>(f)).squaredNorm();
    residual[f] = mean_square[f] - modal;
    is_short[f] = residual[f] < least_share * mean_square[f];
    any_is_short |= is_short[f];
  }
  if (!any_is_short) return;
  rest_ = Eigen::Map<const Eigen::MatrixXf>(frames, points, count);
  rest_.noalias() -=
      basis_->modes_float().rightCols(coefficients.rows()) * coefficients.leftCols(count).cast<float>();
  for (std::size_t f = 0; f < mean_square.size(); ++f) {
    if (!is_short[f]) continue;
    const std::span<const float> rest(rest_.col(static_cast<Eigen::Index>(f)).data(), basis_->points());
    residual[f] = square_sum(rest) / static_cast<double>(points);
  }
}

BlockSummarizer::BlockSummarizer(const ModeBasis& basis)
    : basis_(basis), moments_(basis.points()), modal_residual_(basis) {}

BlockSummary BlockSummarizer::summarize(FrameBlock& block) {
  const std::size_t frames = block.frames.count;
  BlockSummary summary{.frames = block.frames,
                       .coefficients = std::vector<double>(basis_.count() * frames, 0.0),
                       .residual = std::vector<double>(frames, 0.0),
                       .tilt_removed = std::vector<double>(frames, 0.0),
                       .finite = block.finite};
  for (std::size_t first = 0; first < frames; first += ModalResidual::most_frames) {
    summarize_group(block, {first, std::min(ModalResidual::most_frames, frames - first)}, summary);
  }
  std::ranges::fill(block.shift_m, 0.0);
  moments_.add(block);
  summary.maps = moments_.finish();
  return summary;
}

void BlockSummarizer::summarize_group(FrameBlock& block, FrameRange group, BlockSummary& summary) {
  const double scale = 1.0 / static_cast<double>(block.points);
  const auto frames = block.frames.count, modes = basis_.count();
  remove_plane(block, group, summary);
  const Eigen::Map<const Eigen::MatrixXf> columns(block.frame(group.first).data(),
                                                  static_cast<Eigen::Index>(block.points),
                                                  static_cast<Eigen::Index>(group.count));
  products_.noalias() = basis_.modes_float().transpose() * columns;
  coefficients_ = products_.bottomRows(static_cast<Eigen::Index>(modes - plane_modes)).cast<double>() * scale;
  modal_residual_.residual(columns.data(), {summary.tilt_removed.data() + group.first, group.count},
                           coefficients_, {summary.residual.data() + group.first, group.count});
  for (std::size_t f = 0; f < group.count; ++f) {
    const std::size_t frame = group.first + f;
    if (!block.finite[frame]) continue;
    for (std::size_t k = 0; k < modes; ++k) {
      const auto product =
          static_cast<double>(products_(static_cast<Eigen::Index>(k), static_cast<Eigen::Index>(f)));
      // What rounding left of the plane belongs to it; piston holds the shift.
      const double plane = k < plane_modes ? plane_[plane_modes * f + k] : 0.0;
      summary.coefficients[k * frames + frame] =
          product * scale + plane + (k == 0 ? block.shift_m[frame] : 0.0);
    }
  }
}

void BlockSummarizer::remove_plane(FrameBlock& block, FrameRange group, BlockSummary& summary) {
  const double scale = 1.0 / static_cast<double>(block.points);
  plane_.resize(plane_modes * ModalResidual::most_frames);
  for (std::size_t f = 0; f < group.count; f += frames_at_once) {
    // A few frames at a time, so that the second touch finds them in cache.
    const std::size_t first = group.first + f, count = std::min(frames_at_once, group.count - f);
    for (std::size_t i = first; i < first + count; ++i) {
      if (!block.finite[i]) std::ranges::fill(block.frame(i), 0.0F);
    }
    float* const frames = block.frame(first).data();
    double* const plane = plane_.data() + plane_modes * f;
    double* const squares = summary.tilt_removed.data() + first;
    plane_sums(frames, count, block.points, basis_.mode_float(2).data(), basis_.mode_float(3).data(), plane);
    for (std::size_t i = 0; i < plane_modes * count; ++i) plane[i] *= scale;
    subtract_plane(frames, count, block.points, basis_.mode(2).data(), basis_.mode(3).data(), nullptr, plane,
                   squares);
    for (std::size_t i = 0; i < count; ++i) squares[i] *= scale;
  }
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
  const std::size_t frames = block.frames.count, higher = mean_coefficients_.size() - plane_modes;
  preparation_.prepare(block, scratch_);
  Values values{.residual = std::vector<double>(frames, 0.0), .tilt_removed = scratch_.mean_square};
  for (std::size_t f = 0; f < frames; ++f) {
    if (!block.finite[f]) values.tilt_removed[f] = 0.0;
  }
  for (std::size_t first = 0; first < frames; first += ModalResidual::most_frames) {
    const std::size_t count = std::min(ModalResidual::most_frames, frames - first);
    coefficients_.setZero(static_cast<Eigen::Index>(higher), static_cast<Eigen::Index>(count));
    for (std::size_t f = 0; f < count; ++f) {
      if (!block.finite[first + f]) continue;
      for (std::size_t k = 0; k < higher; ++k) {
        coefficients_(static_cast<Eigen::Index>(k), static_cast<Eigen::Index>(f)) =
            coefficients[(k + plane_modes) * frames + first + f] - mean_coefficients_[k + plane_modes];
      }
    }
    modal_residual_.residual(block.frame(first).data(), {values.tilt_removed.data() + first, count},
                             coefficients_, {values.residual.data() + first, count});
  }
  return values;
}

bool summary_knows(const Removal& removal, std::size_t modes) {
  return removal.highest_mode() <= modes;
}

}  // namespace bentlight::optics
