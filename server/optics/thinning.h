// Thinning a series to what a drawing can show, keeping its extremes.
#pragma once

#include <cstddef>
#include <span>
#include <vector>

namespace bentlight::optics {

/// Least, greatest and mean value of each bin. A bin without finite values holds NaN.
struct Thinned {
  std::vector<double> low, high, mean;    // [bins]
  std::vector<std::size_t> first, count;  // [bins]; the values that a bin covers, NaN included
};

/// At most `bins` bins of equal length (one more or less); fewer values than bins give each its own.
Thinned thinned(std::span<const double> values, std::size_t bins);

}  // namespace bentlight::optics
