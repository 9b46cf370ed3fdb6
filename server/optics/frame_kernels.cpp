// Compiled with associative sums (server/CMakeLists.txt), so that each sum runs in several lanes. Nothing
// here may rely on the order of additions; NaN stays NaN.
#include "optics/frame_kernels.h"

#include <algorithm>

namespace bentlight::optics {

namespace {

// Points whose sum stays in float: 64 additions a lane keep its error below one float step on average.
constexpr std::size_t tile_points = 512;

template <std::size_t Frames>
void plane_sums_of(const float* frames, std::size_t points, const float* a, const float* b, double* sums) {
  double total[Frames][3] = {};
  for (std::size_t tile = 0; tile < points; tile += tile_points) {
    const std::size_t end = std::min(points, tile + tile_points);
    float s[Frames] = {}, sa[Frames] = {}, sb[Frames] = {};
    for (std::size_t p = tile; p < end; ++p) {
      for (std::size_t f = 0; f < Frames; ++f) {
        const float value = frames[f * points + p];
        s[f] += value;
        sa[f] += value * a[p];
        sb[f] += value * b[p];
      }
    }
    for (std::size_t f = 0; f < Frames; ++f) {
      total[f][0] += static_cast<double>(s[f]);
      total[f][1] += static_cast<double>(sa[f]);
      total[f][2] += static_cast<double>(sb[f]);
    }
  }
  for (std::size_t f = 0; f < Frames; ++f) {
    for (std::size_t k = 0; k < 3; ++k) sums[f * 3 + k] = total[f][k];
  }
}

// The compiler is told that no frame is a map (__restrict): without that it takes one value at a time. The
// plane is evaluated in double: in float, a tilt of a thousand times the rest cost 5e-6 of the rms
// (frame_preparation_test).
template <std::size_t Frames, bool HasCenter>
void subtract_plane_of(float* __restrict frames,
                       std::size_t points,
                       const double* __restrict a,
                       const double* __restrict b,
                       const float* __restrict center,
                       const double* __restrict plane,
                       double* __restrict squares) {
  double total[Frames] = {};
  for (std::size_t tile = 0; tile < points; tile += tile_points) {
    const std::size_t end = std::min(points, tile + tile_points);
    for (std::size_t f = 0; f < Frames; ++f) {
      float* __restrict frame = frames + f * points;
      const double c0 = plane[3 * f], c1 = plane[3 * f + 1], c2 = plane[3 * f + 2];
      float sum = 0.0F;
      for (std::size_t p = tile; p < end; ++p) {
        const double rest = static_cast<double>(frame[p]) - (c0 + c1 * a[p] + c2 * b[p]);
        const float left = static_cast<float>(rest) - (HasCenter ? center[p] : 0.0F);
        frame[p] = left;
        sum += left * left;
      }
      total[f] += static_cast<double>(sum);
    }
  }
  std::copy(total, total + Frames, squares);
}

template <std::size_t Frames>
void add_about_pilot_of(const float* __restrict frames,
                        std::size_t points,
                        const float* __restrict pilot,
                        float* __restrict sum,
                        float* __restrict squares) {
  for (std::size_t p = 0; p < points; ++p) {
    float s = 0.0F, q = 0.0F;
    for (std::size_t f = 0; f < Frames; ++f) {
      const float difference = frames[f * points + p] - pilot[p];
      s += difference;
      q += difference * difference;
    }
    sum[p] += s;
    squares[p] += q;
  }
}

/// Calls `group(f)` for every whole group of frames and `one(f)` for each that is left.
template <class Group, class One>
void in_groups(std::size_t count, Group group, One one) {
  std::size_t f = 0;
  for (; f + frames_at_once <= count; f += frames_at_once) group(f);
  for (; f < count; ++f) one(f);
}

}  // namespace

void plane_sums(const float* frames,
                std::size_t count,
                std::size_t points,
                const float* a,
                const float* b,
                double* sums) {
  in_groups(
      count,
      [&](std::size_t f) { plane_sums_of<frames_at_once>(frames + f * points, points, a, b, sums + f * 3); },
      [&](std::size_t f) { plane_sums_of<1>(frames + f * points, points, a, b, sums + f * 3); });
}

void subtract_plane(float* frames,
                    std::size_t count,
                    std::size_t points,
                    const double* a,
                    const double* b,
                    const float* center,
                    const double* plane,
                    double* squares) {
  const auto subtract = [&]<std::size_t Frames>(std::size_t f) {
    float* const first = frames + f * points;
    if (center != nullptr) {
      subtract_plane_of<Frames, true>(first, points, a, b, center, plane + f * 3, squares + f);
    } else {
      subtract_plane_of<Frames, false>(first, points, a, b, center, plane + f * 3, squares + f);
    }
  };
  in_groups(
      count, [&](std::size_t f) { subtract.template operator()<frames_at_once>(f); },
      [&](std::size_t f) { subtract.template operator()<1>(f); });
}

void lift(float* frames, std::size_t count, std::size_t points, const float* lift, double* squares) {
  for (std::size_t f = 0; f < count; ++f) {
    float* const frame = frames + f * points;
    for (std::size_t p = 0; p < points; ++p) frame[p] += lift[f];
    squares[f] = square_sum({frame, points});
  }
}

double square_sum(std::span<const float> frame) {
  double total = 0.0;
  for (std::size_t tile = 0; tile < frame.size(); tile += tile_points) {
    const std::size_t end = std::min(frame.size(), tile + tile_points);
    float sum = 0.0F;
    for (std::size_t p = tile; p < end; ++p) sum += frame[p] * frame[p];
    total += static_cast<double>(sum);
  }
  return total;
}

void add_about_pilot(const float* frames,
                     std::size_t count,
                     std::size_t points,
                     const float* pilot,
                     float* sum,
                     float* squares) {
  in_groups(
      count,
      [&](std::size_t f) {
        add_about_pilot_of<frames_at_once>(frames + f * points, points, pilot, sum, squares);
      },
      [&](std::size_t f) { add_about_pilot_of<1>(frames + f * points, points, pilot, sum, squares); });
}

}  // namespace bentlight::optics
