#include "optics/autocorrelation.h"

#include <algorithm>
#include <numeric>
#include <stdexcept>

#include <Eigen/Core>

namespace bentlight::optics {

namespace {

std::vector<double> without_mean(std::span<const double> values) {
  double sum = 0.0;
  for (const double value : values) sum += value - values.front();
  const double mean = values.front() + sum / static_cast<double>(values.size());
  std::vector<double> centered(values.size());
  std::ranges::transform(values, centered.begin(), [&](double value) { return value - mean; });
  return centered;
}

double lagged_sum(const std::vector<double>& centered, std::size_t lag) {
  const auto count = static_cast<Eigen::Index>(centered.size() - lag);
  const Eigen::Map<const Eigen::VectorXd> early(centered.data(), count), late(centered.data() + lag, count);
  return early.dot(late);
}

}  // namespace

std::vector<double> autocorrelation(std::span<const double> values, std::size_t max_lag) {
  if (values.size() <= max_lag) throw std::invalid_argument("autocorrelation: more lags than values");
  const auto centered = without_mean(values);
  const double square = lagged_sum(centered, 0);
  std::vector<double> correlation(max_lag + 1, 0.0);
  correlation[0] = 1.0;
  for (std::size_t lag = 1; lag <= max_lag && square > 0.0; ++lag) correlation[lag] = lagged_sum(centered, lag) / square;
  return correlation;
}

double effective_samples(std::span<const double> values) {
  const std::size_t count = values.size();
  if (count < 4) return static_cast<double>(count);
  const auto centered = without_mean(values);
  const double square = lagged_sum(centered, 0);
  if (square <= 0.0) return static_cast<double>(count);
  // Pairs begin with r_0 + r_1; r_0 itself is the 1 of the formula and not in the sum.
  double sum = 0.0;
  for (std::size_t lag = 0; lag + 1 < count; lag += 2) {
    const double even = lag == 0 ? 1.0 : lagged_sum(centered, lag) / square;
    const double odd = lagged_sum(centered, lag + 1) / square;
    if (even + odd <= 0.0) break;
    const auto weight = [&](std::size_t k) { return 1.0 - static_cast<double>(k) / static_cast<double>(count); };
    sum += (lag == 0 ? 0.0 : weight(lag) * even) + weight(lag + 1) * odd;
  }
  return static_cast<double>(count) / std::max(1.0 + 2.0 * sum, 1.0 / static_cast<double>(count));
}

}  // namespace bentlight::optics
