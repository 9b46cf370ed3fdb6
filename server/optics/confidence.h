// How sure: intervals for means and percentiles of correlated frames, and whether a series stands still.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

namespace bentlight::optics {

struct Interval {
  double low = 0.0, high = 0.0, level = 0.0;
};

double normal_quantile(double probability);

/// Quantile of Student's t with `freedom` degrees.
///
///   needs   probability inside 0 to 1, freedom > 0
///   source  bisection on the incomplete beta function (Abramowitz and Stegun 26.7.1)
double student_t_quantile(double probability, double freedom);

/// Means of about sqrt(T) neighbouring batches, each several correlation times long; what is left over at the end is
/// spread over the batches.
std::vector<double> batch_means(std::span<const double> values);

/// Interval for the mean of correlated values.
///
///   source  batch means with Student's t: Conway, Management Science 9 (1963) 414; Law and Kelton, common practice
Interval mean_interval(std::span<const double> values, double level);

/// Interval for a percentile of correlated values: the share of values below it has a standard error by batch means, and
/// the distribution function is inverted at both its ends.
///
///   source  Woodruff, J. Am. Stat. Assoc. 47 (1952) 635
Interval percentile_interval(std::span<const double> values, double percent, double level);

struct Stationarity {
  double halves_z = 0.0;                // second half minus first, in standard errors
  double reverse_arrangements_z = 0.0;  // positive for a falling series, in standard deviations
};

/// source  Bendat and Piersol, Random Data, on batch means: reverse arrangements
Stationarity stationarity(std::span<const double> values);

/// Running mean over the first n values, with its interval, at lengths spaced evenly by their logarithm.
struct Convergence {
  std::vector<double> frames, mean, low, high;
};
Convergence convergence(std::span<const double> values, double level);

}  // namespace bentlight::optics
