#include <algorithm>
#include <cmath>
#include <numeric>

#include "optics/confidence.h"
#include "optics/autocorrelation.h"
#include "optics/series_statistics.h"
#include "query/analyses/analyses.h"
#include "query/prepared.h"

namespace bentlight::query {

namespace {

const Unit opd{"m", 1};
const Unit opd_squared{"m2", 2};
const Unit ratio{"1"};

const std::vector<double> reported_percents = {1, 5, 10, 25, 50, 75, 90, 95, 99};

bool wants_maps(const Recipe& recipe) { return recipe.text("maps") == "yes"; }

Source source_of(const Recipe& recipe) {
  return wants_maps(recipe) ? source_of_maps(recipe) : source_of_series(recipe);
}

Expected<Plan> plan(const Recipe& recipe) {
  const std::size_t series_bytes = recipe.preparation->window.count * 6 * sizeof(double);
  const std::size_t map_bytes = recipe.view->native.points() * 6 * sizeof(double);
  if (source_of(recipe) == Source::frames) return plan_of_frames(recipe, series_bytes + map_bytes);
  return Plan{.source = Source::summary, .memory_bytes = series_bytes + 4 * map_bytes};
}

/// OPD_rms of the frames that are finite.
std::vector<double> opd_rms_of(std::span<const double> mean_squares) {
  std::vector<double> rms;
  rms.reserve(mean_squares.size());
  for (const double square : mean_squares) {
    if (std::isfinite(square)) rms.push_back(std::sqrt(std::max(0.0, square)));
  }
  return rms;
}

void add_values(std::span<const double> rms, double level, Result& result) {
  const auto moments = optics::moments(rms);
  const double mean_square =
      std::transform_reduce(rms.begin(), rms.end(), 0.0, std::plus<>(), [](double value) { return value * value; }) /
      static_cast<double>(rms.size());
  const auto interval = optics::mean_interval(rms, level);
  result.values.push_back({"opd_rms_mean", moments.mean, opd, interval.low, interval.high, interval.level});
  result.values.push_back({"opd_rms_std", moments.std, opd});
  result.values.push_back({"opd_rms_overall", std::sqrt(mean_square), opd});
  result.values.push_back({"effective_samples", optics::effective_samples(rms), ratio});
  result.values.push_back({"skewness", moments.skewness, ratio});
  result.values.push_back({"kurtosis", moments.kurtosis, ratio});
  const auto median = optics::percentile_interval(rms, 50.0, level);
  result.values.push_back(
      {"opd_rms_median", optics::percentiles(rms, std::vector{50.0}).front(), opd, median.low, median.high, level});
  const auto [low, high] = std::ranges::minmax(rms);
  result.values.push_back({"opd_rms_least", low, opd});
  result.values.push_back({"opd_rms_greatest", high, opd});
}

void add_percentiles(std::span<const double> rms, double level, Result& result) {
  const auto values = optics::percentiles(rms, reported_percents);
  std::vector<double> low, high;
  for (const double percent : reported_percents) {
    const auto interval = optics::percentile_interval(rms, percent, level);
    low.push_back(interval.low);
    high.push_back(interval.high);
  }
  const std::size_t count = reported_percents.size();
  result.arrays.push_back({"percent", {count}, {"%"}, {"percent"}, reported_percents});
  result.arrays.push_back({"percentiles", {count}, opd, {"percent"}, values});
  result.arrays.push_back({"percentiles_low", {count}, opd, {"percent"}, low});
  result.arrays.push_back({"percentiles_high", {count}, opd, {"percent"}, high});
}

void add_histogram(std::span<const double> rms, std::size_t bins, Result& result) {
  const auto histogram = optics::histogram(rms, bins);
  const std::size_t count = histogram.counts.size();
  std::vector<double> low(histogram.edges.begin(), histogram.edges.end() - 1);
  std::vector<double> high(histogram.edges.begin() + 1, histogram.edges.end());
  result.arrays.push_back({"histogram_low", {count}, opd, {"histogram_low"}, std::move(low)});
  result.arrays.push_back({"histogram_high", {count}, opd, {"histogram_low"}, std::move(high)});
  result.arrays.push_back({"histogram_count", {count}, {"frames"}, {"histogram_low"}, histogram.counts});
  const auto fit = optics::log_normal_fit(rms);
  if (!fit) {
    result.warnings.push_back({"no-log-normal-fit", "some frame has an OPD_rms of zero, which no log-normal law has"});
    return;
  }
  result.arrays.push_back({"lognormal_count", {count}, {"frames"}, {"histogram_low"},
                           optics::expected_counts(*fit, histogram.edges, rms.size())});
  // The median exp(mu) has a unit; sigma, a spread of logarithms, has none.
  result.values.push_back({"lognormal_median", std::exp(fit->mu), opd});
  result.values.push_back({"lognormal_sigma", fit->sigma, ratio});
  result.values.push_back({"lognormal_ks_distance", fit->ks_distance, ratio});
}

void add_convergence(std::span<const double> rms, double level, Result& result) {
  const auto convergence = optics::convergence(rms, level);
  const std::size_t count = convergence.frames.size();
  result.arrays.push_back({"convergence_frames", {count}, {"frames"}, {"convergence_frames"}, convergence.frames});
  result.arrays.push_back({"convergence_mean", {count}, opd, {"convergence_frames"}, convergence.mean});
  result.arrays.push_back({"convergence_low", {count}, opd, {"convergence_frames"}, convergence.low});
  result.arrays.push_back({"convergence_high", {count}, opd, {"convergence_frames"}, convergence.high});
}

void add_stationarity(std::span<const double> rms, Result& result) {
  const auto stationarity = optics::stationarity(rms);
  result.values.push_back({"halves_difference", stationarity.halves_z, ratio});
  result.values.push_back({"reverse_arrangements", stationarity.reverse_arrangements_z, ratio});
  if (std::abs(stationarity.halves_z) > 3.0 || std::abs(stationarity.reverse_arrangements_z) > 3.0) {
    result.warnings.push_back({"not-stationary",
                               "OPD_rms drifts over the window by more than chance explains (three standard errors); "
                               "intervals assume that it does not"});
  }
}

/// The maps: the time mean before `mean` is removed (the steady lensing seen in this window), and the rms after.
Expected<void> add_maps_from_summary(const Recipe& recipe, Work& work, Result& result) {
  const OpenView& view = *recipe.view;
  const auto maps = window_maps(view, recipe.preparation->window, work);
  if (!maps) return failure(maps);
  std::vector<double> center;
  if (recipe.preparation->removal.mean) {
    auto steady = view.summary.steady_lensing();
    if (!steady) return failure(steady);
    center = std::move(*steady);
  }
  add_map(result, view, view.native, "mean_map", opd, maps->mean);
  add_map(result, view, view.native, "rms_map", opd, maps->rms_about(center));
  return {};
}

Expected<void> add_maps_from_frames(const Recipe& recipe, const optics::Aperture& aperture, const FramesPass& pass,
                                    Work& work, Result& result) {
  std::vector<double> mean = pass.maps.mean;
  if (recipe.preparation->removal.mean) {
    // Prepared frames have lost the steady lensing; the map of the mean puts it back, without the removed modes.
    auto raw = raw_mean_map(recipe, aperture, work);
    if (!raw) return failure(raw);
    const auto& modes = recipe.preparation->removal.modes;
    const auto basis =
        optics::ModeBasis::zernike(aperture, std::max<std::size_t>(1, recipe.preparation->removal.highest_mode()));
    if (!basis) return failure(basis);
    const auto coefficients = basis->coefficients(*raw, modes);
    for (std::size_t p = 0; p < mean.size(); ++p) {
      mean[p] += (*raw)[p];
      for (std::size_t i = 0; i < modes.size(); ++i) mean[p] -= coefficients[i] * basis->mode(modes[i])[p];
    }
  }
  add_map(result, *recipe.view, aperture, "mean_map", opd, mean);
  add_map(result, *recipe.view, aperture, "rms_map", opd, pass.maps.rms_about({}));
  return {};
}

Expected<Result> compute(const Recipe& recipe, Work& work) {
  Result result;
  std::vector<double> mean_squares;
  if (source_of(recipe) == Source::summary) {
    auto squares = mean_squares_from_summary(recipe);
    if (!squares) return failure(squares);
    mean_squares = std::move(*squares);
  } else {
    const auto aperture = aperture_of(recipe);
    if (!aperture) return failure(aperture);
    auto pass = frames_pass(recipe, *aperture, work);
    if (!pass) return failure(pass);
    mean_squares = std::move(pass->mean_square);
    if (wants_maps(recipe) && pass->maps.count > 0) {
      if (auto added = add_maps_from_frames(recipe, *aperture, *pass, work, result); !added) return failure(added);
    }
  }
  const std::vector<double> rms = opd_rms_of(mean_squares);
  if (rms.size() < 2) {
    return failure(ErrorCode::empty_window, "fewer than two frames of this window are finite", "first");
  }
  const double level = recipe.number("level");
  add_values(rms, level, result);
  add_percentiles(rms, level, result);
  add_histogram(rms, recipe.whole_number("histogram_bins"), result);
  add_convergence(rms, level, result);
  add_stationarity(rms, result);
  if (wants_maps(recipe) && source_of(recipe) == Source::summary) {
    if (auto added = add_maps_from_summary(recipe, work, result); !added) return failure(added);
  }
  if (!recipe.preparation->removal.mean) {
    result.warnings.push_back({"holds-steady-lensing",
                               "mean was not removed: OPD_rms and rms_map contain the steady lensing"});
  }
  add_common_warnings(recipe, rms.size(), result);
  return result;
}

}  // namespace

Analysis statistics() {
  return {
      .name = "statistics",
      .summary = "How bad, and how sure: OPD_rms of every frame summed up, its distribution, and maps over the aperture.",
      .method =
          "OPD_rms(t): root mean square over the aperture's points of each prepared frame. opd_rms_mean: its time mean, "
          "interval by batch means with Student's t; opd_rms_overall: root of the mean square over time and points; "
          "opd_rms_std: divisor T-1. Percentiles: linear interpolation (Hyndman and Fan 1996, type 7), intervals by "
          "inversion (Woodruff 1952) with the standard error of correlated frames. effective_samples: initial positive "
          "sequence (Geyer 1992). Skewness and kurtosis: biased forms, 3 for a Gaussian. Log-normal fit: moments of the "
          "logarithm, Kolmogorov-Smirnov distance. Stationarity: difference of halves in standard errors; reverse "
          "arrangements (Bendat and Piersol). Maps: divisor T; partial moments merged after Chan, Golub and LeVeque 1983.",
      .parameters = {{.name = "maps",
                      .kind = ParameterKind::choice,
                      .summary = "Whether mean_map and rms_map are wanted. Without them more preparations are answered "
                                 "from the summary.",
                      .standard = "yes",
                      .choices = {"yes", "no"}},
                     {.name = "level",
                      .unit = "1",
                      .summary = "Confidence level of all intervals.",
                      .standard = "0.95",
                      .low = 0.5,
                      .high = 0.999},
                     {.name = "histogram_bins",
                      .kind = ParameterKind::whole_number,
                      .summary = "Bins of the histogram; 0 chooses by the rule of Freedman and Diaconis.",
                      .standard = "0",
                      .low = 0,
                      .high = 1000}},
      .values = {{"opd_rms_mean", "m", "Time mean of OPD_rms(t)."},
                 {"opd_rms_std", "m", "Standard deviation of OPD_rms(t)."},
                 {"opd_rms_overall", "m", "Root mean square over time and points."},
                 {"effective_samples", "1", "Independent frames that would carry as much information."},
                 {"opd_rms_median", "m", "Median of OPD_rms(t)."},
                 {"opd_rms_least", "m", "Least OPD_rms(t)."},
                 {"opd_rms_greatest", "m", "Greatest OPD_rms(t)."},
                 {"skewness", "1", "Of OPD_rms(t)."},
                 {"kurtosis", "1", "Of OPD_rms(t); 3 for a Gaussian."},
                 {"lognormal_median", "m", "exp(mu) of the log-normal fit."},
                 {"lognormal_sigma", "1", "Standard deviation of ln OPD_rms(t)."},
                 {"lognormal_ks_distance", "1", "Kolmogorov-Smirnov distance of the fit."},
                 {"halves_difference", "1", "Second half minus first, in standard errors."},
                 {"reverse_arrangements", "1", "Reverse arrangements of batch means, in standard deviations."}},
      .arrays = {{"mean_map", "m", {"y", "x"}, "Time mean in the window, removed modes out, before `mean` is removed."},
                 {"rms_map", "m", {"y", "x"}, "Root mean square over time of the prepared frames."},
                 {"percentiles", "m", {"percent"}, "Percentiles of OPD_rms(t)."},
                 {"percentiles_low", "m", {"percent"}, "Lower ends of their intervals."},
                 {"percentiles_high", "m", {"percent"}, "Upper ends of their intervals."},
                 {"histogram_high", "m", {"histogram_low"}, "Upper edges of the bins; histogram_low has the lower."},
                 {"histogram_count", "frames", {"histogram_low"}, "Frames in each bin."},
                 {"lognormal_count", "frames", {"histogram_low"}, "What the log-normal fit would put there."},
                 {"convergence_mean", "m", {"convergence_frames"}, "Running mean over the first frames."},
                 {"convergence_low", "m", {"convergence_frames"}, "Lower end of its interval."},
                 {"convergence_high", "m", {"convergence_frames"}, "Upper end of its interval."}},
      .plan = plan,
      .compute = compute,
  };
}

}  // namespace bentlight::query
