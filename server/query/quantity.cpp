#include "query/quantity.h"

#include <algorithm>
#include <cmath>
#include <limits>
#include <numeric>

#include <fmt/format.h>
#include <fmt/ranges.h>

#include "base/text.h"
#include "optics/modes.h"
#include "query/frame_fold.h"

namespace bentlight::query {

namespace {

constexpr double not_a_number = std::numeric_limits<double>::quiet_NaN();

const std::vector<std::string> quantity_forms = {"opd_rms",       "piston",      "tip",
                                                 "tilt",          "coefficient:K", "signal:NAME",
                                                 "point:ROW:COLUMN"};

tl::unexpected<Error> refused(std::string_view text, std::string reason, std::vector<std::string> accepted) {
  return failure(ErrorCode::bad_parameter, fmt::format("quantity={}: {}", text, reason), "quantity", std::move(accepted));
}

Expected<Quantity> parse_signal(std::string_view text, const Recipe& recipe) {
  const std::string wanted(text.substr(text.find(':') + 1));
  std::vector<std::string> known;
  for (const auto& signal : recipe.view->file.signals) {
    if (signal.name == wanted) return Quantity{.kind = QuantityKind::signal, .signal = wanted};
    known.push_back("signal:" + signal.name);
  }
  return refused(text, known.empty() ? "this view has no companion signals" : "this view has no such signal", known);
}

Expected<Quantity> parse_point(std::string_view text, const Recipe& recipe) {
  const auto parts = split(text, ':');
  const auto row = parts.size() == 3 ? parse_whole_number(parts[1]) : std::nullopt;
  const auto column = parts.size() == 3 ? parse_whole_number(parts[2]) : std::nullopt;
  const auto& grid = recipe.view->file.grid;
  const bool is_on_grid = row && column && *row >= 0 && *column >= 0 && *row < static_cast<long long>(grid.rows) &&
                          *column < static_cast<long long>(grid.columns);
  if (!is_on_grid) {
    return refused(text, fmt::format("the grid has rows 0 to {} and columns 0 to {}", grid.rows - 1, grid.columns - 1),
                   {fmt::format("point:{}:{}", grid.rows / 2, grid.columns / 2)});
  }
  return Quantity{.kind = QuantityKind::point,
                  .row = static_cast<std::size_t>(*row),
                  .column = static_cast<std::size_t>(*column)};
}

/// Which point of `aperture` lies at the quantity's row and column.
Expected<std::size_t> point_number(const Quantity& quantity, const optics::Aperture& aperture) {
  const std::size_t place = quantity.row * aperture.columns() + quantity.column;
  std::size_t point = 0;
  for (const optics::PointRun& run : aperture.runs()) {
    if (place >= run.first && place < run.first + run.count) return point + (place - run.first);
    point += run.count;
  }
  return failure(ErrorCode::bad_parameter,
                 fmt::format("row {}, column {} lies outside the aperture", quantity.row, quantity.column), "quantity");
}

Expected<std::vector<double>> coefficient_from_summary(const Quantity& quantity, const Recipe& recipe) {
  const auto& summary = recipe.view->summary;
  auto series = summary.coefficient(quantity.mode, recipe.preparation->window);
  const auto finite = summary.finite(recipe.preparation->window);
  const auto means = summary.mean_coefficients();
  if (!series) return series;
  if (!finite) return failure(finite);
  if (!means) return failure(means);
  const double mean = recipe.preparation->removal.mean ? (*means)[quantity.mode - 1] : 0.0;
  for (std::size_t t = 0; t < series->size(); ++t) (*series)[t] = (*finite)[t] ? (*series)[t] - mean : not_a_number;
  return series;
}

struct Nothing {};

Expected<std::vector<double>> coefficient_from_frames(const Quantity& quantity, const Recipe& recipe,
                                                      const optics::Aperture& aperture, Work& work) {
  const auto reader = recipe.view->frames();
  if (!reader) return failure(reader);
  const auto basis = optics::ModeBasis::zernike(aperture, quantity.mode);
  if (!basis) return failure(basis);
  double mean = 0.0;
  if (recipe.preparation->removal.mean) {
    const auto raw = raw_mean_map(recipe, aperture, work);
    if (!raw) return failure(raw);
    mean = basis->coefficients(*raw, std::vector{quantity.mode}).front();
  }
  const auto window = recipe.preparation->window;
  std::vector<double> values(window.count);
  const auto folded = fold_frames<Nothing>(
      *reader, window, aperture, work, [] { return Nothing(); },
      [&](Nothing&, optics::FrameBlock& block, std::size_t) -> Expected<void> {
        const auto coefficients = optics::mode_coefficients(block, *basis, quantity.mode);
        for (std::size_t f = 0; f < block.frames.count; ++f) {
          values[block.frames.first - window.first + f] =
              coefficients[(quantity.mode - 1) * block.frames.count + f] - mean;
        }
        return {};
      },
      [](Nothing&&) {});
  if (!folded) return failure(folded);
  return values;
}

Expected<std::vector<double>> point_from_frames(const Quantity& quantity, const Recipe& recipe,
                                                const optics::Aperture& aperture, Work& work) {
  const auto reader = recipe.view->frames();
  if (!reader) return failure(reader);
  const auto point = point_number(quantity, aperture);
  if (!point) return failure(point);
  const auto preparation = preparation_of(recipe, aperture, work);
  if (!preparation) return failure(preparation);
  const auto window = recipe.preparation->window;
  std::vector<double> values(window.count);
  std::vector<optics::FramePreparation::Scratch> scratch(work.pool.lanes());
  const auto folded = fold_frames<Nothing>(
      *reader, window, aperture, work, [] { return Nothing(); },
      [&](Nothing&, optics::FrameBlock& block, std::size_t lane) -> Expected<void> {
        preparation->prepare(block, scratch[lane]);
        for (std::size_t f = 0; f < block.frames.count; ++f) {
          values[block.frames.first - window.first + f] =
              block.finite[f] ? static_cast<double>(block.frame(f)[*point]) : not_a_number;
        }
        return {};
      },
      [](Nothing&&) {});
  if (!folded) return failure(folded);
  return values;
}

Expected<std::vector<double>> opd_rms_series(const Recipe& recipe, Work& work) {
  std::vector<double> squares;
  if (source_of_series(recipe) == Source::summary) {
    auto known = mean_squares_from_summary(recipe);
    if (!known) return known;
    squares = std::move(*known);
  } else {
    const auto aperture = aperture_of(recipe);
    if (!aperture) return failure(aperture);
    auto pass = frames_pass(recipe, *aperture, work);
    if (!pass) return failure(pass);
    squares = std::move(pass->mean_square);
  }
  for (double& value : squares) value = value < 0.0 ? 0.0 : std::sqrt(value);  // a frame that is not finite stays NaN
  return squares;
}

}  // namespace

Parameter quantity_parameter() {
  return {.name = "quantity",
          .kind = ParameterKind::text,
          .summary = "One value per frame: opd_rms; piston, tip, tilt or coefficient:K, the mode's coefficient in the "
                     "orthonormal basis of the aperture; signal:NAME, a companion signal; point:ROW:COLUMN.",
          .standard = "opd_rms",
          .pattern = R"([\w:. /-]{1,128})",
          .example = "opd_rms"};
}

Expected<Quantity> parse_quantity(std::string_view text, const Recipe& recipe) {
  if (text == "opd_rms") return Quantity{.kind = QuantityKind::opd_rms};
  if (text == "piston") return Quantity{.kind = QuantityKind::coefficient, .mode = 1};
  if (text == "tip") return Quantity{.kind = QuantityKind::coefficient, .mode = 2};
  if (text == "tilt") return Quantity{.kind = QuantityKind::coefficient, .mode = 3};
  if (text.starts_with("signal:")) return parse_signal(text, recipe);
  if (text.starts_with("point:")) return parse_point(text, recipe);
  if (text.starts_with("coefficient:")) {
    const auto mode = parse_whole_number(text.substr(text.find(':') + 1));
    if (mode && *mode >= 1 && *mode <= static_cast<long long>(optics::most_removed_modes)) {
      return Quantity{.kind = QuantityKind::coefficient, .mode = static_cast<std::size_t>(*mode)};
    }
    return refused(text, fmt::format("modes are counted from 1 to {}", optics::most_removed_modes), {"coefficient:4"});
  }
  return refused(text, fmt::format("known are {}", fmt::join(quantity_forms, ", ")), quantity_forms);
}

Source source_of_quantity(const Quantity& quantity, const Recipe& recipe) {
  switch (quantity.kind) {
    case QuantityKind::opd_rms:
      return source_of_series(recipe);
    case QuantityKind::coefficient: {
      const bool over_record = !recipe.preparation->removal.mean || recipe.preparation->mean_over == MeanOver::record;
      return recipe.preparation->is_native_aperture() && over_record && quantity.mode <= recipe.view->summary.modes()
                 ? Source::summary
                 : Source::frames;
    }
    case QuantityKind::signal:
      return Source::summary;
    case QuantityKind::point:
      return Source::frames;
  }
  throw std::logic_error("source_of_quantity: a kind without a source");
}

Expected<Plan> plan_of_quantity(const Quantity& quantity, const Recipe& recipe) {
  const std::size_t series_bytes = recipe.preparation->window.count * 2 * sizeof(double);
  if (source_of_quantity(quantity, recipe) == Source::frames) return plan_of_frames(recipe, series_bytes);
  return Plan{.source = Source::summary, .memory_bytes = series_bytes};
}

Expected<QuantitySeries> quantity_series(const Quantity& quantity, const Recipe& recipe, Work& work) {
  const Unit opd{"m", 1};
  if (quantity.kind == QuantityKind::signal) {
    const auto& signals = recipe.view->file.signals;
    const auto signal = std::ranges::find(signals, quantity.signal, &archive::Signal::name);
    const auto window = recipe.preparation->window;
    const auto first = signal->values.begin() + static_cast<std::ptrdiff_t>(window.first);
    return QuantitySeries{.values = {first, first + static_cast<std::ptrdiff_t>(window.count)},
                          .unit = {signal->unit.empty() ? "1" : signal->unit}};
  }
  Expected<std::vector<double>> values;
  if (quantity.kind == QuantityKind::opd_rms) {
    values = opd_rms_series(recipe, work);
  } else if (source_of_quantity(quantity, recipe) == Source::summary) {
    values = coefficient_from_summary(quantity, recipe);
  } else {
    const auto aperture = aperture_of(recipe);
    if (!aperture) return failure(aperture);
    values = quantity.kind == QuantityKind::point ? point_from_frames(quantity, recipe, *aperture, work)
                                                  : coefficient_from_frames(quantity, recipe, *aperture, work);
  }
  if (!values) return failure(values);
  return QuantitySeries{.values = std::move(*values), .unit = opd};
}

}  // namespace bentlight::query
