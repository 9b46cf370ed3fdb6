#include <algorithm>
#include <cmath>
#include <limits>

#include <fmt/format.h>

#include "base/limits.h"
#include "query/analyses/analyses.h"
#include "query/frame_fold.h"
#include "query/prepared.h"

namespace bentlight::query {

namespace {

// The largest reply: an hour's animation at thirty frames a second of 64 x 64 points is beyond it, a look is not.
constexpr std::uint64_t most_bytes = 256 * limits::mebi;

/// Frames of the window that are given: every `every`-th, from its first.
std::vector<std::size_t> chosen(const Recipe& recipe) {
  std::vector<std::size_t> frames;
  const auto window = recipe.preparation->window;
  for (std::size_t frame = window.first; frame < window.end(); frame += recipe.whole_number("every")) {
    frames.push_back(frame);
  }
  return frames;
}

std::uint64_t reply_bytes(const Recipe& recipe) {
  const auto& grid = recipe.view->file.grid;
  const std::size_t every = recipe.whole_number("every");
  const std::uint64_t count = (recipe.preparation->window.count + every - 1) / every;
  return count * grid.rows * grid.columns * sizeof(float);
}

Expected<Plan> plan(const Recipe& recipe) {
  const std::uint64_t bytes = reply_bytes(recipe);
  if (bytes > most_bytes) {
    return failure(ErrorCode::too_large,
                   fmt::format("{} MiB of frames were asked for; at most {} MiB leave at once. Narrow the window, or take "
                               "fewer with every=N",
                               bytes >> 20, most_bytes >> 20),
                   "last");
  }
  auto plan = plan_of_frames(recipe, bytes);
  if (!plan) return plan;
  plan->memory_bytes = std::min<std::size_t>(plan->memory_bytes, limits::question_memory_bytes);
  return plan;
}

Expected<Result> compute(const Recipe& recipe, Work& work) {
  const OpenView& view = *recipe.view;
  const auto reader = view.frames();
  if (!reader) return failure(reader);
  const auto aperture = aperture_of(recipe);
  if (!aperture) return failure(aperture);
  const auto preparation = preparation_of(recipe, *aperture, work);
  if (!preparation) return failure(preparation);

  const auto wanted = chosen(recipe);
  const std::size_t plane = view.file.grid.rows * view.file.grid.columns;
  std::vector<float> frames(wanted.size() * plane, std::numeric_limits<float>::quiet_NaN());
  std::vector<double> rms(wanted.size()), time(wanted.size()), number(wanted.size());
  struct Lane {
    optics::FrameBlock block;
    archive::FrameReader::Scratch scratch;
    optics::FramePreparation::Scratch prepared;
  };
  std::vector<Lane> lanes(work.pool.lanes());
  // Neighbours share a chunk: a lane takes frames in groups as long as the reader likes to read.
  const std::size_t every = recipe.whole_number("every");
  const std::size_t group = std::max<std::size_t>(1, reader->natural_frames() / every);
  const std::size_t groups = (wanted.size() + group - 1) / group;
  const auto read = work.pool.for_each(groups, work.stop, [&](std::size_t g, std::size_t lane_index) -> Expected<void> {
    Lane& lane = lanes[lane_index];
    const std::size_t begin = g * group, end = std::min(wanted.size(), begin + group);
    const optics::FrameRange range{wanted[begin], wanted[end - 1] - wanted[begin] + 1};
    if (auto got = reader->read(range, *aperture, lane.block, lane.scratch); !got) return got;
    work.progress.done += reader->stored_bytes(range);
    preparation->prepare(lane.block, lane.prepared);
    for (std::size_t i = begin; i < end; ++i) {
      const std::size_t f = wanted[i] - range.first;
      rms[i] = std::sqrt(lane.prepared.mean_square[f]);
      time[i] = view.file.time_of(wanted[i]);
      number[i] = static_cast<double>(wanted[i]);
      if (!lane.block.finite[f]) continue;  // stays NaN everywhere
      const float* from = lane.block.frame(f).data();
      for (const optics::PointRun& run : aperture->runs()) {
        std::copy_n(from, run.count, frames.begin() + static_cast<std::ptrdiff_t>(i * plane + run.first));
        from += run.count;
      }
    }
    return {};
  });
  if (!read) return failure(read);
  if (const auto unchanged = reader->verify_unchanged(); !unchanged) return failure(unchanged);

  Result result;
  const std::size_t count = wanted.size();
  const auto finite = static_cast<std::size_t>(std::ranges::count_if(rms, [](double v) { return std::isfinite(v); }));
  result.arrays.push_back({"time", {count}, {"s"}, {"time"}, std::move(time)});
  result.arrays.push_back({"frame", {count}, {"frames"}, {"time"}, std::move(number)});
  result.arrays.push_back({"opd_rms", {count}, {"m", 1}, {"time"}, std::move(rms)});
  result.arrays.push_back({"y", {view.file.grid.rows}, {"m"}, {"y"}, view.file.grid.y_m});
  result.arrays.push_back({"x", {view.file.grid.columns}, {"m"}, {"x"}, view.file.grid.x_m});
  result.arrays.push_back({"frames",
                           {count, view.file.grid.rows, view.file.grid.columns},
                           {"m", 1},
                           {"time", "y", "x"},
                           std::move(frames)});
  add_common_warnings(recipe, recipe.preparation->window.count - (count - finite), result);
  return result;
}

}  // namespace

Analysis frames() {
  return {
      .name = "frames",
      .summary = "The prepared frames themselves; NaN outside the aperture.",
      .method = "Least squares on an orthonormal basis of the aperture (Noll 1976).",
      .parameters = {{.name = "every",
                      .kind = ParameterKind::whole_number,
                      .unit = "frames",
                      .summary = "Gives every N-th frame of the window.",
                      .standard = "1",
                      .low = 1,
                      .high = 1e9}},
      .arrays = {{"frames", "m", {"time", "y", "x"}, "Prepared frames."},
                 {"time", "s", {"time"}, "Instant of each frame."},
                 {"frame", "frames", {"time"}, "Number of each frame, from 0."},
                 {"opd_rms", "m", {"time"}, "OPD_rms of each frame."}},
      .plan = plan,
      .compute = compute,
  };
}

}  // namespace bentlight::query
