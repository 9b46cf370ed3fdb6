#include <algorithm>
#include <cmath>

#include "optics/modes.h"
#include "optics/thinning.h"
#include "query/analyses/analyses.h"
#include "query/prepared.h"
#include "query/quantity.h"

namespace bentlight::query {

namespace {

Expected<Plan> plan(const Recipe& recipe) {
  const auto quantity = parse_quantity(recipe.text("quantity"), recipe);
  if (!quantity) return failure(quantity);
  return plan_of_quantity(*quantity, recipe);
}

/// For tip and tilt: the angle, in radians, that a coefficient of one metre stands for. Mode 2 is x over its own rms, so
/// a plane of slope s has the coefficient s times the rms of x over the points.
Expected<double> angle_of_coefficient(const Recipe& recipe, std::size_t mode) {
  const auto aperture = aperture_of(recipe);
  if (!aperture) return failure(aperture);
  const auto basis = optics::ModeBasis::zernike(*aperture, 3);
  if (!basis) return failure(basis);
  const auto along = mode == 2 ? aperture->x_m() : aperture->y_m();
  const double rms_m = basis->coefficients({along.data(), along.size()}, std::vector{mode}).front();
  return 1.0 / rms_m;  // an angle this small is its slope
}

Expected<Result> compute(const Recipe& recipe, Work& work) {
  const auto quantity = parse_quantity(recipe.text("quantity"), recipe);
  if (!quantity) return failure(quantity);
  const auto series = quantity_series(*quantity, recipe, work);
  if (!series) return failure(series);
  const auto thinned = optics::thinned(series->values, recipe.whole_number("bins"));

  Result result;
  const OpenView& view = *recipe.view;
  const std::size_t first = recipe.preparation->window.first, count = thinned.mean.size();
  std::vector<double> time, frames;
  for (std::size_t bin = 0; bin < count; ++bin) {
    const std::size_t from = first + thinned.first[bin], last = from + thinned.count[bin] - 1;
    time.push_back((view.file.time_of(from) + view.file.time_of(last)) / 2);
    frames.push_back(static_cast<double>(from));
  }
  result.arrays.push_back({"time", {count}, {"s"}, {"time"}, std::move(time)});
  result.arrays.push_back({"low", {count}, series->unit, {"time"}, thinned.low});
  result.arrays.push_back({"high", {count}, series->unit, {"time"}, thinned.high});
  result.arrays.push_back({"mean", {count}, series->unit, {"time"}, thinned.mean});
  result.arrays.push_back({"frame", {count}, {"frames"}, {"time"}, std::move(frames)});
  if (quantity->kind == QuantityKind::coefficient && (quantity->mode == 2 || quantity->mode == 3)) {
    const auto angle = angle_of_coefficient(recipe, quantity->mode);
    if (!angle) return failure(angle);
    result.values.push_back({"angle_per_metre", *angle, {"rad/m"}});
  }
  const auto finite = static_cast<std::size_t>(
      std::ranges::count_if(series->values, [](double value) { return std::isfinite(value); }));
  add_common_warnings(recipe, finite, result);
  return result;
}

}  // namespace

Analysis series() {
  return {
      .name = "series",
      .summary = "One quantity against time, thinned for drawing: least, greatest and mean of each bin are kept.",
      .method = "Bins of equal numbers of frames; frames that are not finite are left out of a bin.",
      .parameters = {quantity_parameter(),
                     {.name = "bins",
                      .kind = ParameterKind::whole_number,
                      .summary = "Bins over the window; a window of fewer frames gives each frame its own.",
                      .standard = "1000",
                      .low = 1,
                      .high = 1'000'000}},
      .values = {{"angle_per_metre", "rad/m", "For tip and tilt: the angle that a coefficient of one metre stands for."}},
      .arrays = {{"time", "s", {"time"}, "Middle of each bin on the view's clock."},
                 {"low", "m", {"time"}, "Least value in the bin; a signal has its own unit."},
                 {"high", "m", {"time"}, "Greatest value in the bin."},
                 {"mean", "m", {"time"}, "Mean over the bin."},
                 {"frame", "frames", {"time"}, "First frame of the bin."}},
      .plan = plan,
      .compute = compute,
  };
}

}  // namespace bentlight::query
