// Statistics of a series of values, one per frame.
#pragma once

#include <cstddef>
#include <optional>
#include <span>
#include <vector>

namespace bentlight::optics {

/// Mean, standard deviation (divisor count - 1), skewness m3 / m2^1.5 and kurtosis m4 / m2^2 (biased forms; 3
/// for a Gaussian).
struct Moments {
  std::size_t count = 0;
  double mean = 0.0, std = 0.0, skewness = 0.0, kurtosis = 0.0;
};

/// needs  at least two values, all finite
Moments moments(std::span<const double> values);

/// The values in ascending order.
///
///   needs  no NaN
///   cost   linear: a radix sort, 1 ms for 100,000 values
std::vector<double> sorted(std::span<const double> values);

/// Percentiles by linear interpolation between order statistics.
///
///   needs   at least one value; percents from 0 to 100
///   source  Hyndman and Fan, The American Statistician 50 (1996) 361, type 7
std::vector<double> percentiles(std::span<const double> values, std::span<const double> percents);

/// The same of values in ascending order.
double percentile_of_sorted(std::span<const double> ascending, double percent);

struct Histogram {
  std::vector<double> edges;   // [bins + 1], equally spaced
  std::vector<double> counts;  // [bins]; the last bin holds its upper edge too
};

/// `bins` 0 chooses a width near that of Freedman and Diaconis, rounded to 1, 2, 2.5 or 5 times a power of
/// ten, with edges at its multiples and 16 to 128 bins across the values; otherwise so many bins from the
/// least to the greatest.
///
///   needs   at least one value, all finite
///   source  Freedman and Diaconis, Z. Wahrscheinlichkeitstheorie 57 (1981) 453
Histogram histogram(std::span<const double> values, std::size_t bins);
Histogram histogram_of_sorted(std::span<const double> ascending, std::size_t bins);

struct LogNormalFit {
  double mu = 0.0, sigma = 0.0;  // mean and standard deviation (divisor count - 1) of the logarithm
  double ks_distance = 0.0;      // Kolmogorov-Smirnov: greatest distance of the distribution functions
};

/// Nothing when a value is not positive or all are alike.
std::optional<LogNormalFit> log_normal_fit(std::span<const double> values);
std::optional<LogNormalFit> log_normal_fit_of_sorted(std::span<const double> ascending);

/// What the fit puts between each pair of edges, out of `count` values.
std::vector<double> expected_counts(const LogNormalFit& fit,
                                    std::span<const double> edges,
                                    std::size_t count);

double normal_cdf(double z);

}  // namespace bentlight::optics
