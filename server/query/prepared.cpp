#include "query/prepared.h"

#include <algorithm>
#include <cmath>
#include <limits>

#include <fmt/format.h>

#include "base/limits.h"
#include "optics/modes.h"
#include "optics/summary.h"
#include "query/frame_fold.h"

namespace bentlight::query {

namespace {

bool is_answered_by_record(const Preparation& preparation) {
  return preparation.is_native_aperture() && !(preparation.removal.mean && preparation.mean_over == MeanOver::window);
}

const optics::Removal plane_only{.mean = false, .modes = {1, 2, 3}};

/// Moments of the frames of `range` on the native aperture, piston, tip and tilt removed, from the frames.
Expected<optics::MomentMaps> edge_maps(const OpenView& view, const archive::FrameReader& reader,
                                       const optics::FramePreparation& preparation, optics::FrameRange range, Work& work) {
  optics::MomentMaps maps = optics::MomentMaps::of(view.native.points());
  std::vector<optics::FramePreparation::Scratch> scratch(work.pool.lanes());
  const auto folded = fold_frames<optics::MomentAccumulator>(
      reader, range, view.native, work, [&] { return optics::MomentAccumulator(view.native.points()); },
      [&](optics::MomentAccumulator& part, optics::FrameBlock& block, std::size_t lane) -> Expected<void> {
        preparation.prepare(block, scratch[lane]);
        part.add(block);
        return {};
      },
      [&](optics::MomentAccumulator&& part) { maps.merge(part.finish()); });
  if (!folded) return failure(folded);
  return maps;
}

}  // namespace

Source source_of_series(const Recipe& recipe) {
  const Preparation& preparation = *recipe.preparation;
  const bool knows = is_answered_by_record(preparation) &&
                     optics::summary_knows(preparation.removal, recipe.view->summary.modes());
  return knows ? Source::summary : Source::frames;
}

Source source_of_maps(const Recipe& recipe) {
  const Preparation& preparation = *recipe.preparation;
  return preparation.is_native_aperture() && preparation.removal.is_plane() &&
                 source_of_series(recipe) == Source::summary
             ? Source::summary
             : Source::frames;
}

Expected<Plan> plan_of_frames(const Recipe& recipe, std::size_t extra_bytes) {
  const auto reader = recipe.view->frames();
  if (!reader) return failure(reader);
  const auto aperture = aperture_of(recipe);
  if (!aperture) return failure(aperture);
  const auto window = recipe.preparation->window;
  const std::size_t lanes = 1 + std::thread::hardware_concurrency();
  const std::size_t lane_bytes = reader->memory_bytes(reader->natural_frames(), aperture->points());
  // Beside its block, each lane holds the maps of its part: a pilot, two float sums and two double maps; as many parts
  // again may wait to be merged.
  const std::size_t part_bytes = aperture->points() * (3 * sizeof(float) + 2 * sizeof(double));
  return Plan{.source = Source::frames,
              .stored_bytes = reader->stored_bytes(window),
              .decoded_bytes = std::uint64_t{window.count} * recipe.view->file.map.rows() *
                               recipe.view->file.map.columns() * sizeof(float),
              .memory_bytes = lanes * (lane_bytes + 3 * part_bytes) + window.count * 2 * sizeof(double) + extra_bytes};
}

Expected<optics::Aperture> aperture_of(const Recipe& recipe) {
  return recipe.view->native.cut(recipe.preparation->cut);
}

Expected<std::vector<double>> raw_mean_map(const Recipe& recipe, const optics::Aperture& aperture, Work& work) {
  const OpenView& view = *recipe.view;
  std::vector<double> native;
  std::vector<double> coefficients(3, 0.0);
  if (recipe.preparation->mean_over == MeanOver::record) {
    auto steady = view.summary.steady_lensing();
    const auto means = view.summary.mean_coefficients();
    if (!steady || !means) return failure(ErrorCode::damaged_state, "the summary cannot be read", view.record.id);
    native = std::move(*steady);
    std::copy_n(means->begin(), 3, coefficients.begin());
  } else {
    auto maps = window_maps(view, recipe.preparation->window, work);
    if (!maps) return failure(maps);
    native = std::move(maps->mean);
    const auto finite = view.summary.finite(recipe.preparation->window);
    if (!finite) return failure(finite);
    for (std::size_t k = 0; k < 3; ++k) {
      const auto series = view.summary.coefficient(k + 1, recipe.preparation->window);
      if (!series) return failure(series);
      double sum = 0.0, count = 0.0;
      for (std::size_t t = 0; t < series->size(); ++t) {
        if ((*finite)[t]) sum += (*series)[t], count += 1.0;
      }
      coefficients[k] = count > 0.0 ? sum / count : 0.0;
    }
  }
  // The summary's map is without piston, tip and tilt; their means make it the mean of raw frames again.
  const auto basis = optics::ModeBasis::zernike(view.native, 3);
  if (!basis) return failure(basis);
  for (std::size_t k = 0; k < 3; ++k) {
    const auto mode = basis->mode(k + 1);
    for (std::size_t p = 0; p < native.size(); ++p) native[p] += coefficients[k] * mode[p];
  }
  std::vector<double> mean;
  for (const std::size_t position : aperture.positions_in(view.native)) mean.push_back(native[position]);
  return mean;
}

Expected<optics::FramePreparation> preparation_of(const Recipe& recipe, const optics::Aperture& aperture, Work& work) {
  std::vector<double> mean;
  if (recipe.preparation->removal.mean) {
    auto map = raw_mean_map(recipe, aperture, work);
    if (!map) return failure(map);
    mean = std::move(*map);
  }
  return optics::FramePreparation::make(aperture, recipe.preparation->removal, mean);
}

Expected<std::vector<double>> mean_squares_from_summary(const Recipe& recipe) {
  const index::SummaryReader& summary = recipe.view->summary;
  const Preparation& preparation = *recipe.preparation;
  const auto window = preparation.window;
  const bool fluctuation = preparation.removal.mean;
  auto squares = preparation.removal.is_plane() ? summary.tilt_removed(window, fluctuation)
                                                : summary.residual(window, fluctuation);
  if (!squares) return squares;
  const auto means = summary.mean_coefficients();
  if (!means) return failure(means);
  if (!preparation.removal.is_plane()) {
    for (std::size_t k = 1; k <= summary.modes(); ++k) {
      if (preparation.removal.has(k)) continue;
      const auto series = summary.coefficient(k, window);
      if (!series) return failure(series);
      const double mean = fluctuation ? (*means)[k - 1] : 0.0;
      for (std::size_t t = 0; t < window.count; ++t) (*squares)[t] += ((*series)[t] - mean) * ((*series)[t] - mean);
    }
  }
  const auto finite = summary.finite(window);
  if (!finite) return failure(finite);
  for (std::size_t t = 0; t < window.count; ++t) {
    if (!(*finite)[t]) (*squares)[t] = std::numeric_limits<double>::quiet_NaN();
  }
  return squares;
}

Expected<optics::MomentMaps> window_maps(const OpenView& view, optics::FrameRange window, Work& work) {
  const std::size_t length = view.summary.block_frames();
  const std::size_t frames = view.summary.frames();
  // A last block that is short is whole all the same.
  const std::size_t first_block = (window.first + length - 1) / length;
  const std::size_t end_block = window.end() == frames ? (frames + length - 1) / length : window.end() / length;
  optics::MomentMaps maps = optics::MomentMaps::of(view.native.points());
  std::vector<optics::FrameRange> edges;
  if (first_block < end_block) {
    auto whole = view.summary.maps(first_block, end_block - first_block);
    if (!whole) return failure(whole);
    maps = std::move(*whole);
    const std::size_t inner_first = first_block * length, inner_end = std::min(frames, end_block * length);
    if (window.first < inner_first) edges.push_back({window.first, inner_first - window.first});
    if (inner_end < window.end()) edges.push_back({inner_end, window.end() - inner_end});
  } else {
    edges.push_back(window);
  }
  if (edges.empty()) return maps;
  const auto reader = view.frames();
  if (!reader) return failure(reader);
  const auto preparation = optics::FramePreparation::make(view.native, plane_only, {});
  if (!preparation) return failure(preparation);
  for (const auto edge : edges) {
    const auto part = edge_maps(view, *reader, *preparation, edge, work);
    if (!part) return failure(part);
    maps.merge(*part);
  }
  return maps;
}

Expected<FramesPass> frames_pass(const Recipe& recipe, const optics::Aperture& aperture, Work& work) {
  const auto reader = recipe.view->frames();
  if (!reader) return failure(reader);
  const auto preparation = preparation_of(recipe, aperture, work);
  if (!preparation) return failure(preparation);
  const auto window = recipe.preparation->window;
  FramesPass pass{.mean_square = std::vector<double>(window.count), .maps = optics::MomentMaps::of(aperture.points())};
  std::vector<optics::FramePreparation::Scratch> scratch(work.pool.lanes());
  const auto folded = fold_frames<optics::MomentAccumulator>(
      *reader, window, aperture, work, [&] { return optics::MomentAccumulator(aperture.points()); },
      [&](optics::MomentAccumulator& part, optics::FrameBlock& block, std::size_t lane) -> Expected<void> {
        preparation->prepare(block, scratch[lane]);
        part.add(block);
        const auto at = static_cast<std::ptrdiff_t>(block.frames.first - window.first);
        std::ranges::copy(scratch[lane].mean_square, pass.mean_square.begin() + at);
        return {};
      },
      [&](optics::MomentAccumulator&& part) { pass.maps.merge(part.finish()); });
  if (!folded) return failure(folded);
  return pass;
}

void add_common_warnings(const Recipe& recipe, std::size_t finite_frames, Result& result) {
  const Preparation& preparation = *recipe.preparation;
  if (finite_frames < preparation.window.count) {
    result.warnings.push_back({"frames-with-nan",
                               fmt::format("{} of {} frames hold NaN inside the aperture and were left out",
                                           preparation.window.count - finite_frames, preparation.window.count)});
  }
  const bool is_part = preparation.window.count < recipe.view->summary.frames();
  if (preparation.removal.mean && is_part && preparation.mean_over == MeanOver::record) {
    result.warnings.push_back({"mean-over-record",
                               "the steady lensing taken out is the mean over the whole record, not over this window; "
                               "mean_over=window asks for the other"});
  }
  result.provenance["frames"] = {{"first", preparation.window.first},
                                 {"last", preparation.window.end() - 1},
                                 {"count", preparation.window.count},
                                 {"finite", finite_frames},
                                 {"frame_rate_hz", recipe.view->record.frame_rate_hz}};
  result.provenance["modes"] = "orthonormal on this aperture, built from Zernike order (Noll 1976)";
}

void add_map(Result& result, const OpenView& view, const optics::Aperture& aperture, std::string name, Unit unit,
             std::span<const double> values) {
  if (result.array("y") == nullptr) {
    result.arrays.push_back({"y", {view.file.grid.rows}, {"m"}, {"y"}, view.file.grid.y_m});
    result.arrays.push_back({"x", {view.file.grid.columns}, {"m"}, {"x"}, view.file.grid.x_m});
  }
  const auto grid = aperture.on_grid(values);
  // Maps are drawn and compared, not summed on: a float's seven digits are what the frames themselves have.
  result.arrays.push_back({std::move(name),
                           {view.file.grid.rows, view.file.grid.columns},
                           std::move(unit),
                           {"y", "x"},
                           std::vector<float>(grid.begin(), grid.end())});
}

}  // namespace bentlight::query
