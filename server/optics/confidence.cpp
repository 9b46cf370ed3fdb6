#include "optics/confidence.h"

#include <algorithm>
#include <cmath>
#include <numbers>
#include <numeric>
#include <stdexcept>

#include "optics/autocorrelation.h"
#include "optics/series_statistics.h"

namespace bentlight::optics {

namespace {

/// Regularised incomplete beta function by its continued fraction (Abramowitz and Stegun 26.5.8, modified Lentz).
double incomplete_beta(double a, double b, double x) {
  if (x <= 0.0) return 0.0;
  if (x >= 1.0) return 1.0;
  if (x > (a + 1) / (a + b + 2)) return 1.0 - incomplete_beta(b, a, 1.0 - x);
  const double front =
      std::exp(std::lgamma(a + b) - std::lgamma(a) - std::lgamma(b) + a * std::log(x) + b * std::log1p(-x)) / a;
  constexpr double tiny = 1e-300;
  double c = 1.0, d = 1.0 / std::max(std::abs(1.0 - (a + b) * x / (a + 1)), tiny), value = d;
  for (int m = 1; m < 500; ++m) {
    for (const bool is_even : {true, false}) {
      const double numerator = is_even ? m * (b - m) * x / ((a + 2 * m - 1) * (a + 2 * m))
                                       : -(a + m) * (a + b + m) * x / ((a + 2 * m) * (a + 2 * m + 1));
      d = 1.0 / (1.0 + numerator * d);
      c = 1.0 + numerator / c;
      value *= d * c;
      if (!is_even && std::abs(d * c - 1.0) < 1e-15) return front * value;
    }
  }
  return front * value;
}

double student_t_cdf(double t, double freedom) {
  const double tail = 0.5 * incomplete_beta(freedom / 2, 0.5, freedom / (freedom + t * t));
  return t > 0 ? 1.0 - tail : tail;
}

struct MeanError {
  double mean, error, freedom;
};

/// Mean, its standard error by batch means, and the degrees of freedom.
MeanError mean_error(std::span<const double> values) {
  const auto batches = batch_means(values);
  const Moments spread = moments(batches);
  const auto count = static_cast<double>(batches.size());
  return {spread.mean, spread.std / std::sqrt(count), count - 1};
}

}  // namespace

double normal_quantile(double probability) {
  // Newton's method on the distribution function; its derivative is the density.
  double z = 0.0;
  for (int step = 0; step < 60; ++step) {
    const double density = std::exp(-0.5 * z * z) / std::sqrt(2 * std::numbers::pi);
    const double change = std::clamp((normal_cdf(z) - probability) / density, -1.0, 1.0);
    z -= change;
    if (std::abs(change) < 1e-14) break;
  }
  return z;
}

double student_t_quantile(double probability, double freedom) {
  if (!(probability > 0.0 && probability < 1.0 && freedom > 0.0)) {
    throw std::invalid_argument("student_t_quantile: a probability or freedom that has no quantile");
  }
  if (probability < 0.5) return -student_t_quantile(1.0 - probability, freedom);
  double low = 0.0, high = 1.0;
  while (student_t_cdf(high, freedom) < probability) high *= 2.0;
  for (int step = 0; step < 200 && high - low > 1e-14 * high; ++step) {
    const double middle = (low + high) / 2;
    (student_t_cdf(middle, freedom) < probability ? low : high) = middle;
  }
  return (low + high) / 2;
}

std::vector<double> batch_means(std::span<const double> values) {
  if (values.size() < 2) throw std::invalid_argument("batch_means: fewer than two values");
  const auto count = static_cast<double>(values.size());
  // A batch must outlast the memory of the series: at least eight of the lengths that one independent value takes.
  const double memory = count / std::max(1.0, effective_samples(values));
  const double wanted = std::min(std::sqrt(count), count / (8 * memory));
  const std::size_t batches = std::clamp<std::size_t>(static_cast<std::size_t>(wanted), 2, values.size());
  std::vector<double> means(batches);
  for (std::size_t i = 0; i < batches; ++i) {
    const std::size_t begin = i * values.size() / batches, end = (i + 1) * values.size() / batches;
    const auto part = values.subspan(begin, end - begin);
    means[i] = std::accumulate(part.begin(), part.end(), 0.0) / static_cast<double>(part.size());
  }
  return means;
}

Interval mean_interval(std::span<const double> values, double level) {
  const auto [batch_mean, error, freedom] = mean_error(values);
  const double mean = std::accumulate(values.begin(), values.end(), 0.0) / static_cast<double>(values.size());
  const double reach = student_t_quantile(0.5 + level / 2, freedom) * error;
  return {mean - reach, mean + reach, level};
}

Interval percentile_interval(std::span<const double> values, double percent, double level) {
  const double quantile = percentiles(values, std::vector{percent}).front();
  std::vector<double> is_below(values.size());
  std::ranges::transform(values, is_below.begin(), [&](double value) { return value <= quantile ? 1.0 : 0.0; });
  const auto [share, error, freedom] = mean_error(is_below);
  const double reach = 100.0 * student_t_quantile(0.5 + level / 2, freedom) * error;
  const std::vector ends = {std::max(0.0, percent - reach), std::min(100.0, percent + reach)};
  const auto found = percentiles(values, ends);
  return {found[0], found[1], level};
}

Stationarity stationarity(std::span<const double> values) {
  Stationarity result;
  if (values.size() < 8) return result;
  const auto first = mean_error(values.first(values.size() / 2));
  const auto second = mean_error(values.subspan(values.size() / 2));
  const double error = std::hypot(first.error, second.error);
  if (error > 0.0) result.halves_z = (second.mean - first.mean) / error;

  const auto means = batch_means(values);
  std::size_t reversed = 0;
  for (std::size_t i = 0; i < means.size(); ++i) {
    for (std::size_t j = i + 1; j < means.size(); ++j) reversed += means[i] > means[j];
  }
  const auto n = static_cast<double>(means.size());
  const double variance = n * (2 * n + 5) * (n - 1) / 72;
  if (variance > 0.0) {
    result.reverse_arrangements_z = (static_cast<double>(reversed) - n * (n - 1) / 4) / std::sqrt(variance);
  }
  return result;
}

Convergence convergence(std::span<const double> values, double level) {
  constexpr std::size_t steps = 24, least = 16;
  Convergence result;
  std::vector<double> sums(values.size() + 1, 0.0);
  for (std::size_t i = 0; i < values.size(); ++i) sums[i + 1] = sums[i] + values[i];
  // The memory of the series is known best from all of it; each length then has its share of independent values.
  const double memory = static_cast<double>(values.size()) / std::max(1.0, effective_samples(values));
  const double spread = values.size() > 1 ? moments(values).std : 0.0;
  const double first = std::log(static_cast<double>(std::min(least, values.size())));
  const double last = std::log(static_cast<double>(values.size()));
  for (std::size_t i = 0; i < steps; ++i) {
    const double share = static_cast<double>(i) / static_cast<double>(steps - 1);
    const auto length = std::min(values.size(), static_cast<std::size_t>(std::lround(std::exp(first + share * (last - first)))));
    if (!result.frames.empty() && static_cast<double>(length) <= result.frames.back()) continue;
    const double mean = sums[length] / static_cast<double>(length);
    const double independent = std::max(2.0, static_cast<double>(length) / memory);
    const double reach = student_t_quantile(0.5 + level / 2, independent - 1) * spread / std::sqrt(independent);
    result.frames.push_back(static_cast<double>(length));
    result.mean.push_back(mean);
    result.low.push_back(mean - reach);
    result.high.push_back(mean + reach);
  }
  return result;
}

}  // namespace bentlight::optics
