// How sure: intervals for means and percentiles of correlated frames, and whether a series stands still.
#pragma once

#include <cstddef>
#include <cstdint>
#include <functional>
#include <span>
#include <vector>

namespace bentlight::optics {

struct Interval {
  double low = 0.0, high = 0.0, level = 0.0;
};

/// source  Newton's method on the distribution function
double normal_quantile(double probability);

/// Quantile of Student's t with `freedom` degrees.
///
///   needs   probability inside 0 to 1, freedom > 0
///   source  the incomplete beta function (Abramowitz and Stegun 26.7.1) inverted by bracketed Newton steps
double student_t_quantile(double probability, double freedom);

struct Stationarity {
  // Second half's mean minus the first's over its standard error, as the normal deviate that is as unlikely
  // as Student's t with the few degrees of freedom that batches leave.
  double halves_z = 0.0;
  // Positive for a falling series, in standard deviations of what chance gives. Two batches cannot reach 2.
  double reverse_arrangements_z = 0.0;
};

/// Running mean over the first n values, with its interval, at lengths spaced evenly by their logarithm.
struct Convergence {
  std::vector<double> frames, mean, low, high;
};

/// A series and how sure its mean and percentiles are, its frames being correlated. What all answers need
/// (memory and order of the values) is worked out once.
///
///   needs    at least two values, all finite, which outlive this object
///   threads  const afterwards: any thread
///   source   batch means with Student's t: Conway, Management Science 9 (1963) 414; Law and Carson,
///            Operations Research 27 (1979) 1011; common practice
class SeriesConfidence {
 public:
  explicit SeriesConfidence(std::span<const double> values);

  double effective_samples() const { return effective_samples_; }
  std::span<const double> ascending() const { return ascending_; }
  double percentile(double percent) const;

  Interval mean_interval(double level) const;

  /// The share of values below the percentile has a standard error by batch means, and the distribution
  /// function is inverted at both its ends. Ends beyond the least or greatest value stop there: with few
  /// independent values below a percentile the interval is too short, and says so by touching them.
  ///
  ///   source  Woodruff, J. Am. Stat. Assoc. 47 (1952) 635
  Interval percentile_interval(double percent, double level) const;

  /// Zeros for fewer than eight values. Spread and memory are those of the series less its linear trend.
  ///
  ///   source  Bendat and Piersol, Random Data: reverse arrangements, on batch means
  Stationarity stationarity() const;

  Convergence convergence(double level) const;

 private:
  std::span<const double> values_;
  std::vector<double> ascending_;
  double effective_samples_ = 0.0;
};

/// As SeriesConfidence gives, for one question only.
Interval mean_interval(std::span<const double> values, double level);
Interval percentile_interval(std::span<const double> values, double percent, double level);
Stationarity stationarity(std::span<const double> values);
Convergence convergence(std::span<const double> values, double level);

/// Length of bootstrap blocks for the mean of a series, in values.
///
///   source  Politis and White, Econometric Reviews 23 (2004) 53, with the correction of Patton, Politis and
///           White, 28 (2009) 372: flat-top lag window, circular blocks
double bootstrap_block_length(std::span<const double> values);

struct BootstrapOptions {
  double level = 0.95;
  std::size_t resamples = 1000;
  std::size_t block = 0;  // values; 0: by bootstrap_block_length
  std::uint64_t seed = 1;
};

/// Interval for any statistic of a correlated series, from its percentiles over series put together from
/// blocks that are drawn from this one. Slow: for checks, and where no formula holds.
///
///   source  Künsch, Annals of Statistics 17 (1989) 1217: moving blocks
///   cost    `resamples` times the statistic
Interval bootstrap_interval(std::span<const double> values,
                            const std::function<double(std::span<const double>)>& statistic,
                            const BootstrapOptions& options);

}  // namespace bentlight::optics
