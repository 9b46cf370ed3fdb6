// The innermost loops over frames. They run on floats whose piston was shifted away, several frames at a time
// so that the maps are loaded once for all of them; sums of a few hundred floats go over to double.
#pragma once

#include <cstddef>
#include <span>

namespace bentlight::optics {

/// Frames that the loops take together. Groups of it cost least.
inline constexpr std::size_t frames_at_once = 4;

/// Sums over points of frame, frame * a and frame * b, for each frame.
///
///   shapes  frames [count][points]; a, b [points]; sums [count][3]
void plane_sums(
    const float* frames, std::size_t count, std::size_t points, const float* a, const float* b, double* sums);

/// In place: frame -= plane[0] + plane[1] * a + plane[2] * b + center. Gives the sum of squares of the rest.
///
///   shapes  frames [count][points]; a, b [points]; center [points] or null; plane [count][3];
///           squares [count]
void subtract_plane(float* frames,
                    std::size_t count,
                    std::size_t points,
                    const double* a,
                    const double* b,
                    const float* center,
                    const double* plane,
                    double* squares);

/// In place: frame += lift, one number to all points of a frame. Gives the sum of squares.
///
///   shapes  frames [count][points]; lift, squares [count]
void lift(float* frames, std::size_t count, std::size_t points, const float* lift, double* squares);

/// Sum of squares of one frame.
double square_sum(std::span<const float> frame);

/// sum += frame - pilot, squares += (frame - pilot)^2, over all frames.
///
///   shapes  frames [count][points]; pilot, sum, squares [points]
void add_about_pilot(const float* frames,
                     std::size_t count,
                     std::size_t points,
                     const float* pilot,
                     float* sum,
                     float* squares);

}  // namespace bentlight::optics
