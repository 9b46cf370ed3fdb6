#include "optics/preparation.h"

#include <algorithm>
#include <limits>
#include <stdexcept>

#include "optics/frame_kernels.h"

namespace bentlight::optics {

namespace {

using FrameMatrix = Eigen::Map<Eigen::MatrixXf>;  // [points, frames]: a block as columns

FrameMatrix matrix_of(FrameBlock& block) {
  return {block.values.data(), static_cast<Eigen::Index>(block.points),
          static_cast<Eigen::Index>(block.frames.count)};
}

}  // namespace

Expected<FramePreparation> FramePreparation::make(const Aperture& aperture,
                                                  const Removal& removal,
                                                  std::span<const double> mean) {
  if (removal.mean != !mean.empty())
    throw std::invalid_argument("FramePreparation: a mean map goes with removing it");
  const auto basis = ModeBasis::zernike(aperture, std::max<std::size_t>(1, removal.highest_mode()));
  if (!basis) return failure(basis);
  FramePreparation preparation;
  preparation.is_plane_ = removal.is_plane();
  preparation.keeps_piston_ = !removal.has(1);
  preparation.modes_.resize(static_cast<Eigen::Index>(aperture.points()),
                            static_cast<Eigen::Index>(removal.modes.size()));
  for (std::size_t i = 0; i < removal.modes.size(); ++i) {
    preparation.modes_.col(static_cast<Eigen::Index>(i)) =
        basis->modes_float().col(static_cast<Eigen::Index>(removal.modes[i]) - 1);
  }
  if (removal.mean) {
    std::vector<double> center(mean.begin(), mean.end());
    const auto coefficients = basis->coefficients(mean, removal.modes);
    for (std::size_t i = 0; i < removal.modes.size(); ++i) {
      const auto mode = basis->mode(removal.modes[i]);
      for (std::size_t p = 0; p < center.size(); ++p) center[p] -= coefficients[i] * mode[p];
    }
    preparation.center_.assign(center.begin(), center.end());
  }
  return preparation;
}

void FramePreparation::prepare(FrameBlock& block, Scratch& scratch) const {
  scratch.mean_square.resize(block.frames.count);
  for (std::size_t f = 0; f < block.frames.count; ++f) {
    if (!block.finite[f]) std::ranges::fill(block.frame(f), 0.0F);
  }
  if (is_plane_) {
    remove_plane(block, scratch);
  } else {
    remove_modes(block, scratch);
  }
  for (std::size_t f = 0; f < block.frames.count; ++f) {
    block.shift_m[f] = 0.0;
    scratch.mean_square[f] = block.finite[f] ? scratch.mean_square[f] / static_cast<double>(block.points)
                                             : std::numeric_limits<double>::quiet_NaN();
  }
}

void FramePreparation::remove_plane(FrameBlock& block, Scratch& scratch) const {
  const std::size_t count = block.frames.count;
  const float* const tip = modes_.col(1).data();
  const float* const tilt = modes_.col(2).data();
  scratch.sums.resize(3 * count);
  scratch.plane.resize(3 * count);
  plane_sums(block.values.data(), count, block.points, tip, tilt, scratch.sums.data());
  for (std::size_t i = 0; i < 3 * count; ++i) {
    scratch.plane[i] = static_cast<float>(scratch.sums[i] / static_cast<double>(block.points));
  }
  subtract_plane(block.values.data(), count, block.points, tip, tilt,
                 center_.empty() ? nullptr : center_.data(), scratch.plane.data(),
                 scratch.mean_square.data());
}

void FramePreparation::remove_modes(FrameBlock& block, Scratch& scratch) const {
  const std::size_t count = block.frames.count;
  if (modes_.cols() > 0) {
    auto frames = matrix_of(block);
    scratch.coefficients.noalias() = modes_.transpose() * frames;
    scratch.coefficients /= static_cast<float>(block.points);
    frames.noalias() -= modes_ * scratch.coefficients;
  }
  scratch.plane.assign(count, 0.0F);
  for (std::size_t f = 0; f < count; ++f) {
    if (keeps_piston_ && block.finite[f]) scratch.plane[f] = static_cast<float>(block.shift_m[f]);
  }
  subtract_center(block.values.data(), count, block.points, center_.empty() ? nullptr : center_.data(),
                  scratch.plane.data(), scratch.mean_square.data());
}

std::vector<double> mode_coefficients(const FrameBlock& block, const ModeBasis& basis, std::size_t modes) {
  const std::size_t frames = block.frames.count;
  std::vector<double> coefficients(modes * frames);
  const double scale = 1.0 / static_cast<double>(block.points);
  for (std::size_t f = 0; f < frames; ++f) {
    const Eigen::Map<const Eigen::VectorXf> frame(block.frame(f).data(),
                                                  static_cast<Eigen::Index>(block.points));
    for (std::size_t k = 0; k < modes; ++k) {
      // In double: a tilt a thousand times the mode asked for must not leak into it through rounding.
      const double sum = basis.modes().col(static_cast<Eigen::Index>(k)).dot(frame.cast<double>());
      coefficients[k * frames + f] = block.finite[f] ? sum * scale + (k == 0 ? block.shift_m[f] : 0.0)
                                                     : std::numeric_limits<double>::quiet_NaN();
    }
  }
  return coefficients;
}

}  // namespace bentlight::optics
