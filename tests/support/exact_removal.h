// The slow twin of preparation: the same definition, in long double, point by point and mode by mode.
#pragma once

#include <cmath>
#include <numeric>
#include <span>
#include <vector>

#include "optics/modes.h"
#include "optics/removal.h"

namespace bentlight::test {

using Exact = std::vector<long double>;

inline long double mean_product(const Exact& a, const Exact& b) {
  return std::inner_product(a.begin(), a.end(), b.begin(), 0.0L) / static_cast<long double>(a.size());
}

inline void subtract_multiple(Exact& from, const Exact& mode, long double times) {
  for (std::size_t p = 0; p < from.size(); ++p) from[p] -= times * mode[p];
}

/// The first `count` Zernike polynomials, each less its projections on those before, of unit mean square.
inline std::vector<Exact> exact_modes(const optics::Aperture& aperture, std::size_t count) {
  std::vector<Exact> modes;
  for (std::size_t j = 1; j <= count; ++j) {
    Exact mode(aperture.points());
    for (std::size_t p = 0; p < mode.size(); ++p) {
      const double x = aperture.x_m()[p] - aperture.center_x_m(),
                   y = aperture.y_m()[p] - aperture.center_y_m();
      mode[p] =
          optics::zernike(optics::zernike_order(j), std::hypot(x, y) / aperture.radius_m(), std::atan2(y, x));
    }
    for (int pass = 0; pass < 2; ++pass) {
      for (const Exact& before : modes) subtract_multiple(mode, before, mean_product(mode, before));
    }
    const long double norm = std::sqrt(mean_product(mode, mode));
    for (long double& value : mode) value /= norm;
    modes.push_back(std::move(mode));
  }
  return modes;
}

/// A frame less the mean map, less its projections on the removed modes.
inline Exact prepared_exactly(std::span<const double> frame,
                              std::span<const double> mean,
                              const optics::Removal& removal,
                              const std::vector<Exact>& modes) {
  Exact left(frame.begin(), frame.end());
  for (std::size_t p = 0; p < mean.size(); ++p) left[p] -= static_cast<long double>(mean[p]);
  for (const std::size_t k : removal.modes)
    subtract_multiple(left, modes[k - 1], mean_product(left, modes[k - 1]));
  return left;
}

}  // namespace bentlight::test
