#include "optics/preparation.h"

#include <algorithm>
#include <limits>
#include <stdexcept>

#include "optics/frame_kernels.h"

namespace bentlight::optics {

namespace {

constexpr double none = std::numeric_limits<double>::quiet_NaN();

// Frames to one matrix product: many enough for the product to run from registers, few enough for its second
// use of the frames to find them in cache.
constexpr std::size_t product_frames = 64;

/// Takes out of `map` what it holds of the modes in `removed`. Gives their coefficients.
std::vector<double> remove_from(std::vector<double>& map,
                                const ModeBasis& basis,
                                std::span<const std::size_t> removed) {
  auto coefficients = basis.coefficients(map, removed);
  for (std::size_t i = 0; i < removed.size(); ++i) {
    const auto mode = basis.mode(removed[i]);
    for (std::size_t p = 0; p < map.size(); ++p) map[p] -= coefficients[i] * mode[p];
  }
  return coefficients;
}

}  // namespace

Expected<FramePreparation> FramePreparation::make(const Aperture& aperture,
                                                  const Removal& removal,
                                                  std::span<const double> mean) {
  if (removal.mean == mean.empty() || (removal.mean && mean.size() != aperture.points())) {
    throw std::invalid_argument(
        "FramePreparation: a mean map of the aperture's points goes with removing it");
  }
  const auto basis = ModeBasis::zernike(aperture, std::max<std::size_t>(3, removal.highest_mode()));
  if (!basis) return failure(basis);
  FramePreparation preparation;
  preparation.takes_ = {removal.has(1), removal.has(2), removal.has(3)};
  preparation.tip_.assign(basis->mode_float(2).begin(), basis->mode_float(2).end());
  preparation.tilt_.assign(basis->mode_float(3).begin(), basis->mode_float(3).end());
  preparation.tip_exactly_.assign(basis->mode(2).begin(), basis->mode(2).end());
  preparation.tilt_exactly_.assign(basis->mode(3).begin(), basis->mode(3).end());
  const auto higher = std::ranges::upper_bound(removal.modes, std::size_t{3});
  preparation.higher_.resize(static_cast<Eigen::Index>(aperture.points()), removal.modes.end() - higher);
  for (auto mode = higher; mode != removal.modes.end(); ++mode) {
    preparation.higher_.col(mode - higher) = basis->modes_float().col(static_cast<Eigen::Index>(*mode) - 1);
  }
  if (removal.mean) {
    std::vector<double> center(mean.begin(), mean.end());
    remove_from(center, *basis, removal.modes);
    // Where piston is kept, the mean's own goes with the frames' shifts, in double, and not through the float
    // map.
    preparation.center_piston_m_ = remove_from(center, *basis, std::array<std::size_t, 1>{1}).front();
    preparation.center_.assign(center.begin(), center.end());
  }
  return preparation;
}

void FramePreparation::prepare(FrameBlock& block, Scratch& scratch) const {
  if (block.points != tip_.size())
    throw std::invalid_argument("FramePreparation: block and aperture differ in points");
  const std::size_t count = block.frames.count;
  scratch.mean_square.resize(count);
  for (std::size_t f = 0; f < count; ++f) {
    if (!block.finite[f]) std::ranges::fill(block.frame(f), 0.0F), block.shift_m[f] = 0.0;
  }
  remove_plane(block, scratch);
  if (higher_.cols() > 0) remove_higher_modes(block, scratch);
  for (std::size_t f = 0; f < count; ++f) {
    block.shift_m[f] = 0.0;
    scratch.mean_square[f] =
        block.finite[f] ? scratch.mean_square[f] / static_cast<double>(block.points) : none;
  }
}

void FramePreparation::remove_plane(FrameBlock& block, Scratch& scratch) const {
  const double scale = 1.0 / static_cast<double>(block.points);
  const float* const center = center_.empty() ? nullptr : center_.data();
  // A kept piston comes back only after the higher modes are out, which it would disturb.
  const bool lifts_here = !takes_[0] && higher_.cols() == 0;
  std::array<double, 3 * frames_at_once> plane = {};
  for (std::size_t first = 0; first < block.frames.count; first += frames_at_once) {
    // Group by group, so that the second touch finds the frames in cache.
    const std::size_t count = std::min(frames_at_once, block.frames.count - first);
    float* const frames = block.frame(first).data();
    plane_sums(frames, count, block.points, tip_.data(), tilt_.data(), plane.data());
    for (std::size_t f = 0; f < count; ++f) {
      for (std::size_t k = 0; k < 3; ++k) plane[3 * f + k] *= takes_[k] ? scale : 0.0;
      if (lifts_here) plane[3 * f] = center_piston_m_ - block.shift_m[first + f];
    }
    subtract_plane(frames, count, block.points, tip_exactly_.data(), tilt_exactly_.data(), center,
                   plane.data(), scratch.mean_square.data() + first);
  }
}

void FramePreparation::remove_higher_modes(FrameBlock& block, Scratch& scratch) const {
  scratch.lift.resize(product_frames);
  for (std::size_t first = 0; first < block.frames.count; first += product_frames) {
    const std::size_t count = std::min(product_frames, block.frames.count - first);
    Eigen::Map<Eigen::MatrixXf> frames(block.frame(first).data(), higher_.rows(),
                                       static_cast<Eigen::Index>(count));
    scratch.coefficients.noalias() = higher_.transpose() * frames;
    scratch.coefficients /= static_cast<float>(block.points);
    frames.noalias() -= higher_ * scratch.coefficients;
    for (std::size_t f = 0; f < count; ++f) {
      scratch.lift[f] = takes_[0] ? 0.0F : static_cast<float>(block.shift_m[first + f] - center_piston_m_);
    }
    lift(frames.data(), count, block.points, scratch.lift.data(), scratch.mean_square.data() + first);
  }
}

std::vector<double> mode_coefficients(const FrameBlock& block, const ModeBasis& basis, std::size_t modes) {
  if (block.points != basis.points() || modes > basis.count()) {
    throw std::invalid_argument(
        "mode_coefficients: block and basis differ in points, or the basis is too short");
  }
  const std::size_t frames = block.frames.count;
  std::vector<double> coefficients(modes * frames, none);
  const auto used = basis.modes().leftCols(static_cast<Eigen::Index>(modes));
  for (std::size_t f = 0; f < frames; ++f) {
    if (!block.finite[f]) continue;
    const Eigen::Map<const Eigen::VectorXf> frame(block.frame(f).data(), used.rows());
    // In double: a tilt a thousand times the mode asked for must not leak into it through rounding.
    const Eigen::VectorXd means = used.transpose() * frame.cast<double>() / static_cast<double>(block.points);
    for (std::size_t k = 0; k < modes; ++k)
      coefficients[k * frames + f] = means[static_cast<Eigen::Index>(k)];
    if (modes > 0) coefficients[f] += block.shift_m[f];
  }
  return coefficients;
}

}  // namespace bentlight::optics
