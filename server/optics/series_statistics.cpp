#include "optics/series_statistics.h"

#include <algorithm>
#include <array>
#include <bit>
#include <cmath>
#include <cstdint>
#include <numbers>
#include <stdexcept>
#include <utility>

namespace bentlight::optics {

namespace {

/// Bits that order as the doubles do: the sign turned over, and all bits of negative values.
std::uint64_t ordered_bits(double value) {
  const auto bits = std::bit_cast<std::uint64_t>(value);
  return bits ^ ((bits >> 63) != 0 ? ~std::uint64_t{0} : std::uint64_t{1} << 63);
}

double from_ordered_bits(std::uint64_t bits) {
  return std::bit_cast<double>(bits ^ ((bits >> 63) != 0 ? std::uint64_t{1} << 63 : ~std::uint64_t{0}));
}

/// One pass of a radix sort by the 11 bits from `shift` on; nothing to do when all values agree in them.
void sort_by_digit(std::vector<std::uint64_t>& keys, std::vector<std::uint64_t>& room, int shift) {
  constexpr std::size_t digits = 2048;
  const auto digit = [shift](std::uint64_t key) { return (key >> shift) % digits; };
  std::array<std::size_t, digits> place = {};
  for (const std::uint64_t key : keys) ++place[digit(key)];
  if (place[digit(keys.front())] == keys.size()) return;
  std::size_t before = 0;
  for (std::size_t& count : place) before += std::exchange(count, before);
  for (const std::uint64_t key : keys) room[place[digit(key)]++] = key;
  keys.swap(room);
}

/// The least of 1, 2, 2.5, 5 and 10 times a power of ten that is not below `width`.
double round_step(double width) {
  const double power = std::pow(10.0, std::floor(std::log10(width)));
  for (const double factor : {1.0, 2.0, 2.5, 5.0}) {
    if (factor * power >= width * (1 - 1e-12)) return factor * power;
  }
  return 10.0 * power;
}

std::vector<double> round_edges(std::span<const double> ascending) {
  const double low = ascending.front(), high = ascending.back();
  const double quartiles = percentile_of_sorted(ascending, 75) - percentile_of_sorted(ascending, 25);
  const double wanted = 2 * quartiles / std::cbrt(static_cast<double>(ascending.size()));
  // Rounding up at most doubles the width, so that 16 to 126 whole bins remain, and one more at either end.
  const double step = round_step(std::clamp(wanted, (high - low) / 126, (high - low) / 32));
  const double first = std::floor(low / step);
  const auto bins = static_cast<std::size_t>(std::max(1.0, std::ceil(high / step) - first));
  std::vector<double> edges(bins + 1);
  for (std::size_t i = 0; i <= bins; ++i) edges[i] = (first + static_cast<double>(i)) * step;
  // The multiples may fall a rounding short of the values that they enclose.
  edges.front() = std::min(edges.front(), low);
  edges.back() = std::max(edges.back(), high);
  return edges;
}

std::vector<double> equal_edges(double low, double high, std::size_t bins) {
  std::vector<double> edges(bins + 1, high);
  for (std::size_t i = 0; i < bins; ++i) {
    edges[i] = low + (high - low) * static_cast<double>(i) / static_cast<double>(bins);
  }
  return edges;
}

}  // namespace

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

std::vector<double> sorted(std::span<const double> values) {
  std::vector<std::uint64_t> keys(values.size()), room(values.size());
  std::ranges::transform(values, keys.begin(), ordered_bits);
  for (int shift = 0; shift < 64 && !keys.empty(); shift += 11) sort_by_digit(keys, room, shift);
  std::vector<double> ascending(values.size());
  std::ranges::transform(keys, ascending.begin(), from_ordered_bits);
  return ascending;
}

double percentile_of_sorted(std::span<const double> ascending, double percent) {
  if (ascending.empty()) throw std::invalid_argument("percentile_of_sorted: no values");
  const double place = percent / 100.0 * static_cast<double>(ascending.size() - 1);
  const auto low = static_cast<std::size_t>(place);
  const std::size_t next = std::min(low + 1, ascending.size() - 1);
  return ascending[low] + (place - std::floor(place)) * (ascending[next] - ascending[low]);
}

std::vector<double> percentiles(std::span<const double> values, std::span<const double> percents) {
  const std::vector<double> ascending = sorted(values);
  std::vector<double> found;
  for (const double percent : percents) found.push_back(percentile_of_sorted(ascending, percent));
  return found;
}

Histogram histogram(std::span<const double> values, std::size_t bins) {
  return histogram_of_sorted(sorted(values), bins);
}

Histogram histogram_of_sorted(std::span<const double> ascending, std::size_t bins) {
  if (ascending.empty()) throw std::invalid_argument("histogram: no values");
  const double low = ascending.front(), high = ascending.back();
  Histogram histogram;
  if (low == high) {
    // All alike: bins about the value, a tenth of it wide in all.
    const double reach = low != 0.0 ? 0.05 * std::abs(low) : 0.5;
    histogram.edges = equal_edges(low - reach, high + reach, bins == 0 ? 16 : bins);
  } else {
    histogram.edges = bins == 0 ? round_edges(ascending) : equal_edges(low, high, bins);
  }
  auto begin = ascending.begin();
  for (std::size_t bin = 0; bin + 1 < histogram.edges.size(); ++bin) {
    const bool is_last = bin + 2 == histogram.edges.size();
    const auto end =
        is_last ? ascending.end() : std::lower_bound(begin, ascending.end(), histogram.edges[bin + 1]);
    histogram.counts.push_back(static_cast<double>(end - begin));
    begin = end;
  }
  return histogram;
}

double normal_cdf(double z) {
  return 0.5 * std::erfc(-z / std::numbers::sqrt2);
}

namespace {

/// Greatest distance between the steps of `ascending` and the normal distribution. The distribution function
/// rises throughout, so its values at both ends of a stretch bound the distance within: few stretches are
/// looked into.
double distance_from_normal(std::span<const double> ascending, double mean, double std) {
  constexpr std::size_t stretch = 64;
  const auto count = static_cast<double>(ascending.size());
  const auto cdf = [&](std::size_t i) { return normal_cdf((ascending[i] - mean) / std); };
  const auto distance = [&](std::size_t i, double value) {
    return std::max(value - static_cast<double>(i) / count, static_cast<double>(i + 1) / count - value);
  };
  double greatest = 0.0, low = cdf(0);
  for (std::size_t first = 0; first < ascending.size(); first += stretch) {
    const std::size_t last = std::min(first + stretch, ascending.size()) - 1;
    const std::size_t next = std::min(last + 1, ascending.size() - 1);
    const double high = cdf(next);
    const double bound =
        std::max(high - static_cast<double>(first) / count, static_cast<double>(last + 1) / count - low);
    if (bound > greatest) {
      for (std::size_t i = first; i <= last; ++i) greatest = std::max(greatest, distance(i, cdf(i)));
    }
    low = high;
  }
  return greatest;
}

}  // namespace

std::optional<LogNormalFit> log_normal_fit(std::span<const double> values) {
  return log_normal_fit_of_sorted(sorted(values));
}

std::optional<LogNormalFit> log_normal_fit_of_sorted(std::span<const double> ascending) {
  if (ascending.size() < 2 || ascending.front() <= 0.0 || ascending.front() == ascending.back())
    return std::nullopt;
  std::vector<double> logarithms(ascending.begin(), ascending.end());
  for (double& value : logarithms) value = std::log(value);
  const Moments of_logarithm = moments(logarithms);
  if (of_logarithm.std == 0.0) return std::nullopt;
  return LogNormalFit{.mu = of_logarithm.mean,
                      .sigma = of_logarithm.std,
                      .ks_distance = distance_from_normal(logarithms, of_logarithm.mean, of_logarithm.std)};
}

std::vector<double> expected_counts(const LogNormalFit& fit,
                                    std::span<const double> edges,
                                    std::size_t count) {
  const auto below = [&](double edge) {
    return edge > 0 ? normal_cdf((std::log(edge) - fit.mu) / fit.sigma) : 0.0;
  };
  std::vector<double> expected;
  for (std::size_t i = 0; i + 1 < edges.size(); ++i) {
    expected.push_back(static_cast<double>(count) * (below(edges[i + 1]) - below(edges[i])));
  }
  return expected;
}

}  // namespace bentlight::optics
