// Zernike polynomials and the orthonormal modes built from them on an aperture.
//
// Mode 1 is piston, mode 2 tip (grows along x), mode 3 tilt (grows along y), mode 4 focus; the rest follow
// the order of R. J. Noll, J. Opt. Soc. Am. 66 (1976) 207. On a masked, obscured, pixelated aperture the
// polynomials are not orthogonal: they are made so in order, and mode k then spans, with those before it, the
// same space as the first k polynomials. "Orthonormal on this aperture, built from Zernike order" is what
// replies say.
#pragma once

#include <Eigen/Core>
#include <cstddef>
#include <span>
#include <vector>

#include "base/error.h"
#include "optics/aperture.h"

namespace bentlight::optics {

/// Radial order n and azimuthal frequency m; m < 0 is the sine term.
struct ZernikeOrder {
  int n = 0;
  int m = 0;
  bool operator==(const ZernikeOrder&) const = default;
};

/// Noll's single index, from 1. throws  std::invalid_argument below 1
ZernikeOrder zernike_order(std::size_t noll_index);

/// Single index of ANSI Z80.28 and ISO 24157, from 0: (n (n + 2) + m) / 2.
std::size_t ansi_index(ZernikeOrder order);

/// Unit variance over the unit disc (Noll's normalisation). `rho` from 0 to 1, `theta` in radians from the x
/// axis.
///
///   source  Noll (1976), equations 1 and 2: the explicit sum, good to n = 20 or so
double zernike(ZernikeOrder order, double rho, double theta);

/// Modes on the points of one aperture, with mean over points of mode j times mode k = 1 for j = k and 0
/// otherwise.
class ModeBasis {
 public:
  /// The first `count` modes, on the disc of the aperture's center and radius.
  ///
  ///   errors  degenerate_aperture when the points cannot tell so many modes apart; the text says how many
  ///           they can
  ///   cost    4 points count^2 operations
  ///   source  radial polynomials by Kintner's recurrence, Opt. Acta 23 (1976) 679
  static Expected<ModeBasis> zernike(const Aperture& aperture, std::size_t count);

  std::size_t points() const { return static_cast<std::size_t>(modes_.rows()); }
  std::size_t count() const { return static_cast<std::size_t>(modes_.cols()); }
  const Eigen::MatrixXd& modes() const { return modes_; }         // [points, count], column-major
  const Eigen::MatrixXf& modes_float() const { return floats_; }  // the same in float

  /// Mode k, counted from 1. [points]
  std::span<const double> mode(std::size_t k) const { return {modes_.col(column(k)).data(), points()}; }
  std::span<const float> mode_float(std::size_t k) const { return {floats_.col(column(k)).data(), points()}; }

  /// Mean over points of `map` times each of the modes numbered in `wanted`. [wanted]
  std::vector<double> coefficients(std::span<const double> map, std::span<const std::size_t> wanted) const;

 private:
  static Eigen::Index column(std::size_t k) { return static_cast<Eigen::Index>(k) - 1; }
  Eigen::MatrixXd modes_;
  Eigen::MatrixXf floats_;
};

}  // namespace bentlight::optics
