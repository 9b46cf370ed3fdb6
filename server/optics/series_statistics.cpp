#include "optics/series_statistics.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <numeric>
#include <stdexcept>

namespace bentlight::optics {

Moments moments(std::span<const double> values) {
  if (values.size() < 2) throw std::invalid_argument("moments: fewer than two values");
  const auto count = static_cast<double>(values.size());
  // About the first value, so that a large mean costs no digits; then about the mean itself.
  double sum = 0.0;
  for (const double value : values) sum += value - values.front();
  const double mean = values.front() + sum / count;
  double rest = 0.0, m2 = 0.0, m3 = 0.0, m4 = 0.0;
  for (const double value : values) {
    const double d = value - mean, d2 = d * d;
    rest += d;
    m2 += d2;
    m3 += d2 * d;
    m4 += d2 * d2;
  }
  // What rounding of the mean left is taken out (the corrected two-pass form, Chan, Golub and LeVeque 1983).
  m2 -= rest * rest / count;
  const double variance = m2 / count;
  return {.count = values.size(),
          .mean = mean + rest / count,
          .std = std::sqrt(m2 / (count - 1)),
          .skewness = variance > 0 ? m3 / count / std::pow(variance, 1.5) : 0.0,
          .kurtosis = variance > 0 ? m4 / count / (variance * variance) : 0.0};
}

std::vector<double> percentiles(std::span<const double> values, std::span<const double> percents) {
  if (values.empty()) throw std::invalid_argument("percentiles: no values");
  std::vector<double> sorted(values.begin(), values.end());
  std::vector<std::size_t> order(percents.size());
  std::iota(order.begin(), order.end(), std::size_t{0});
  std::ranges::sort(order, {}, [&](std::size_t i) { return percents[i]; });
  std::vector<double> found(percents.size());
  auto settled = sorted.begin();  // below this the values are no greater than those above
  for (const std::size_t i : order) {
    const double place = percents[i] / 100.0 * static_cast<double>(sorted.size() - 1);
    const auto low = sorted.begin() + static_cast<std::ptrdiff_t>(std::floor(place));
    if (low >= settled) std::nth_element(settled, low, sorted.end());
    settled = std::max(settled, low);
    const double fraction = place - std::floor(place);
    const double next = low + 1 == sorted.end() ? *low : *std::min_element(low + 1, sorted.end());
    found[i] = *low + fraction * (next - *low);
  }
  return found;
}

Histogram histogram(std::span<const double> values, std::size_t bins) {
  const auto [low, high] = std::ranges::minmax(values);
  if (bins == 0) {
    const auto quartiles = percentiles(values, std::vector{25.0, 75.0});
    const double width = 2 * (quartiles[1] - quartiles[0]) / std::cbrt(static_cast<double>(values.size()));
    bins = width > 0 ? static_cast<std::size_t>(std::clamp(std::ceil((high - low) / width), 16.0, 128.0)) : 16;
  }
  const double first = low == high ? low - 0.5 : low, last = low == high ? high + 0.5 : high;
  Histogram histogram{.edges = std::vector<double>(bins + 1), .counts = std::vector<double>(bins, 0.0)};
  for (std::size_t i = 0; i <= bins; ++i) {
    histogram.edges[i] = i == bins ? last : first + (last - first) * static_cast<double>(i) / static_cast<double>(bins);
  }
  const double per_bin = static_cast<double>(bins) / (last - first);
  for (const double value : values) {
    auto bin = std::min(bins - 1, static_cast<std::size_t>((value - first) * per_bin));
    // The division may land one bin off at an edge; the edges decide.
    if (value < histogram.edges[bin]) --bin;
    if (bin + 1 < bins && value >= histogram.edges[bin + 1]) ++bin;
    histogram.counts[bin] += 1.0;
  }
  return histogram;
}

double normal_cdf(double z) { return 0.5 * std::erfc(-z / std::numbers::sqrt2); }

std::optional<LogNormalFit> log_normal_fit(std::span<const double> values) {
  if (values.size() < 2 || std::ranges::any_of(values, [](double value) { return !(value > 0.0); })) return std::nullopt;
  std::vector<double> logarithms(values.size());
  std::ranges::transform(values, logarithms.begin(), [](double value) { return std::log(value); });
  const Moments of_logarithm = moments(logarithms);
  if (of_logarithm.std == 0.0) return std::nullopt;
  std::ranges::sort(logarithms);
  LogNormalFit fit{.mu = of_logarithm.mean, .sigma = of_logarithm.std};
  const auto count = static_cast<double>(logarithms.size());
  for (std::size_t i = 0; i < logarithms.size(); ++i) {
    const double cdf = normal_cdf((logarithms[i] - fit.mu) / fit.sigma);
    const auto rank = static_cast<double>(i);
    fit.ks_distance = std::max({fit.ks_distance, cdf - rank / count, (rank + 1) / count - cdf});
  }
  return fit;
}

std::vector<double> expected_counts(const LogNormalFit& fit, std::span<const double> edges, std::size_t count) {
  const auto below = [&](double edge) { return edge > 0 ? normal_cdf((std::log(edge) - fit.mu) / fit.sigma) : 0.0; };
  std::vector<double> expected;
  for (std::size_t i = 0; i + 1 < edges.size(); ++i) {
    expected.push_back(static_cast<double>(count) * (below(edges[i + 1]) - below(edges[i])));
  }
  return expected;
}

}  // namespace bentlight::optics
