// What every analysis of a view needs before its own arithmetic: the aperture of the question, the mean map, and each
// frame's OPD_rms, from the summary where it knows, from the frames otherwise.
#pragma once

#include <cstdint>
#include <vector>

#include "base/error.h"
#include "optics/aperture.h"
#include "optics/moment_maps.h"
#include "optics/preparation.h"
#include "query/analysis.h"
#include "query/recipe.h"
#include "query/work.h"

namespace bentlight::query {

/// Where a question's frame-by-frame values come from.
Source source_of_series(const Recipe& recipe);
/// Where its maps come from: the summary holds maps of frames without piston, tip and tilt.
Source source_of_maps(const Recipe& recipe);

/// The plan of reading a window's frames, with `extra_bytes` for what the analysis itself holds.
Expected<Plan> plan_of_frames(const Recipe& recipe, std::size_t extra_bytes);

/// The aperture of the question. errors  aperture_outside_mask, degenerate_aperture
Expected<optics::Aperture> aperture_of(const Recipe& recipe);

/// What is done to the frames of the question, on `aperture`.
Expected<optics::FramePreparation> preparation_of(const Recipe& recipe, const optics::Aperture& aperture, Work& work);

/// Time mean of raw frames on `aperture`, over the record or the window, as the preparation says. [points], metres
Expected<std::vector<double>> raw_mean_map(const Recipe& recipe, const optics::Aperture& aperture, Work& work);

/// Mean square of each prepared frame of the window, from the summary; NaN where a frame is not finite. [frames], m2
Expected<std::vector<double>> mean_squares_from_summary(const Recipe& recipe);

/// Moments of frames without piston, tip and tilt over a window, on the native aperture: whole blocks from the summary,
/// the edges from frames.
Expected<optics::MomentMaps> window_maps(const OpenView& view, optics::FrameRange window, Work& work);

/// Everything the frames of a window give in one pass.
struct FramesPass {
  std::vector<double> mean_square;  // [frames], m2; NaN where a frame is not finite
  optics::MomentMaps maps;          // of prepared frames
};
Expected<FramesPass> frames_pass(const Recipe& recipe, const optics::Aperture& aperture, Work& work);

/// Says what a reader of the result must know about its window and preparation.
void add_common_warnings(const Recipe& recipe, std::size_t finite_frames, Result& result);

/// The grid's axes of `aperture` as arrays y and x, and `values` [points] on the grid as an array over them.
void add_map(Result& result, const OpenView& view, const optics::Aperture& aperture, std::string name, Unit unit,
             std::span<const double> values);

}  // namespace bentlight::query
