#include "optics/thinning.h"

#include <algorithm>
#include <cmath>
#include <limits>

namespace bentlight::optics {

Thinned thinned(std::span<const double> values, std::size_t bins) {
  const std::size_t count = std::min(bins, values.size());
  constexpr double none = std::numeric_limits<double>::quiet_NaN();
  Thinned thin{.low = std::vector<double>(count, none),
               .high = std::vector<double>(count, none),
               .mean = std::vector<double>(count, none),
               .first = std::vector<std::size_t>(count),
               .count = std::vector<std::size_t>(count)};
  for (std::size_t bin = 0; bin < count; ++bin) {
    const std::size_t begin = bin * values.size() / count, end = (bin + 1) * values.size() / count;
    double sum = 0.0, low = std::numeric_limits<double>::infinity(), high = -low;
    std::size_t finite = 0;
    for (const double value : values.subspan(begin, end - begin)) {
      if (!std::isfinite(value)) continue;
      ++finite;
      sum += value;
      low = std::min(low, value);
      high = std::max(high, value);
    }
    thin.first[bin] = begin;
    thin.count[bin] = end - begin;
    if (finite == 0) continue;
    thin.low[bin] = low;
    thin.high[bin] = high;
    thin.mean[bin] = sum / static_cast<double>(finite);
  }
  return thin;
}

}  // namespace bentlight::optics
