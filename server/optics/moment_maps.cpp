#include "optics/moment_maps.h"

#include <algorithm>
#include <cmath>
#include <stdexcept>

#include "optics/frame_kernels.h"

namespace bentlight::optics {

namespace {

// Floats summed in a row before they go over to double: the error of a sum of 32 stays near one float step.
constexpr std::size_t batch_frames = 32;

/// Merges, point by point, a part of `count` frames whose mean and m2 `part(p)` gives.
template <class Part>
void merge_points(MomentMaps& maps, std::size_t count, Part part) {
  const auto before = static_cast<double>(maps.count), added = static_cast<double>(count);
  const double total = before + added;
  const double share = added / total, cross = before * added / total;
  for (std::size_t p = 0; p < maps.mean.size(); ++p) {
    const auto [mean, m2] = part(p);
    const double difference = mean - maps.mean[p];
    maps.mean[p] += difference * share;
    maps.m2[p] += m2 + difference * difference * cross;
  }
  maps.count += count;
}

struct PointMoments {
  double mean, m2;
};

}  // namespace

void MomentMaps::merge(const MomentMaps& other) {
  if (other.count == 0) return;
  if (other.mean.size() != mean.size())
    throw std::invalid_argument("MomentMaps::merge: maps differ in points");
  merge_points(*this, other.count, [&](std::size_t p) { return PointMoments{other.mean[p], other.m2[p]}; });
}

std::vector<double> MomentMaps::rms_about(std::span<const double> center) const {
  std::vector<double> rms(mean.size());
  for (std::size_t p = 0; p < rms.size(); ++p) {
    const double offset = mean[p] - (center.empty() ? 0.0 : center[p]);
    rms[p] = std::sqrt(m2[p] / static_cast<double>(count) + offset * offset);
  }
  return rms;
}

void MomentAccumulator::add(const FrameBlock& block) {
  if (block.points != maps_.mean.size())
    throw std::invalid_argument("MomentAccumulator: block differs in points");
  for (std::size_t first = 0; first < block.frames.count;) {
    if (!block.finite[first]) {
      ++first;
      continue;
    }
    std::size_t end = first + 1;
    while (end < block.frames.count && block.finite[end]) ++end;
    add_run(block, first, end - first);
    first = end;
  }
}

void MomentAccumulator::add_run(const FrameBlock& block, std::size_t first, std::size_t count) {
  while (count > 0) {
    if (unsettled_ == 0) {
      const auto pilot = block.frame(first);
      pilot_.assign(pilot.begin(), pilot.end());
      sum_.assign(block.points, 0.0F);
      squares_.assign(block.points, 0.0F);
    }
    const std::size_t now = std::min(count, batch_frames - unsettled_);
    add_about_pilot(block.frame(first).data(), now, block.points, pilot_.data(), sum_.data(),
                    squares_.data());
    unsettled_ += now;
    first += now;
    count -= now;
    if (unsettled_ == batch_frames) settle();
  }
}

void MomentAccumulator::settle() {
  if (unsettled_ == 0) return;
  const auto frames = static_cast<double>(unsettled_);
  merge_points(maps_, unsettled_, [&](std::size_t p) {
    const double offset = static_cast<double>(sum_[p]) / frames;
    const double m2 = std::max(0.0, static_cast<double>(squares_[p]) - offset * offset * frames);
    return PointMoments{static_cast<double>(pilot_[p]) + offset, m2};
  });
  unsettled_ = 0;
}

MomentMaps MomentAccumulator::finish() {
  settle();
  MomentMaps done = MomentMaps::of(maps_.mean.size());
  std::swap(done, maps_);
  return done;
}

}  // namespace bentlight::optics
