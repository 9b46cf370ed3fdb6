// How long a series remembers itself, and how many independent values it is worth.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

namespace bentlight::optics {

/// Autocorrelation r_0 = 1 … r_max_lag with the biased estimator: sums over the overlap, divided by the sum
/// of squares about the mean.
///
///   needs   fewer lags than values; a series that is constant gives r_0 = 1 and zeros
///   source  Box and Jenkins; the estimator of NIST's StRD for univariate statistics
///   cost    direct sums for a few lags, Fourier transforms in cache for many
std::vector<double> autocorrelation(std::span<const double> values, std::size_t max_lag);

/// The number of independent values with the same variance of their mean: T / (1 + 2 sum (1 - k/T) r_k), the
/// sum cut at the first pair r_2m + r_2m+1 that is not positive. A constant series counts every value.
///
///   source  Geyer, Statistical Science 7 (1992) 473, initial positive sequence
///   cost    grows with the lag of the cut; 100,000 values take 0.2 to 2 ms
double effective_samples(std::span<const double> values);

}  // namespace bentlight::optics
