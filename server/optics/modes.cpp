#include "optics/modes.h"

#include <fmt/format.h>

#include <cmath>
#include <stdexcept>

namespace bentlight::optics {

ZernikeOrder zernike_order(std::size_t noll_index) {
  if (noll_index < 1) throw std::invalid_argument("zernike_order: Noll's index begins at 1");
  const int j = static_cast<int>(noll_index);
  int n = 0;
  while ((n + 1) * (n + 2) / 2 < j) ++n;
  // Within an order |m| rises in twos from 0 or 1; even indices are cosines, odd ones sines.
  const int place = j - n * (n + 1) / 2;  // 1 … n + 1
  const int m = n % 2 == 0 ? place / 2 * 2 : (place - 1) / 2 * 2 + 1;
  return {n, m != 0 && j % 2 != 0 ? -m : m};
}

std::size_t ansi_index(ZernikeOrder order) {
  return static_cast<std::size_t>((order.n * (order.n + 2) + order.m) / 2);
}

double zernike(ZernikeOrder order, double rho, double theta) {
  const int n = order.n, m = std::abs(order.m);
  double radial = 0.0;
  for (int k = 0; k <= (n - m) / 2; ++k) {
    const double coefficient =
        std::tgamma(n - k + 1) /
        (std::tgamma(k + 1) * std::tgamma((n + m) / 2 - k + 1) * std::tgamma((n - m) / 2 - k + 1));
    radial += (k % 2 == 0 ? coefficient : -coefficient) * std::pow(rho, n - 2 * k);
  }
  if (m == 0) return std::sqrt(n + 1.0) * radial;
  return std::sqrt(2.0 * (n + 1)) * radial * (order.m > 0 ? std::cos(m * theta) : std::sin(m * theta));
}

Expected<ModeBasis> ModeBasis::zernike(const Aperture& aperture, std::size_t count) {
  const auto points = static_cast<Eigen::Index>(aperture.points());
  const auto scale = 1.0 / static_cast<double>(points);
  Eigen::ArrayXd rho(points), theta(points);
  for (Eigen::Index p = 0; p < points; ++p) {
    const double x =
        (aperture.x_m()[static_cast<std::size_t>(p)] - aperture.center_x_m()) / aperture.radius_m();
    const double y =
        (aperture.y_m()[static_cast<std::size_t>(p)] - aperture.center_y_m()) / aperture.radius_m();
    rho[p] = std::hypot(x, y);
    theta[p] = std::atan2(y, x);
  }
  ModeBasis basis;
  basis.modes_.resize(points, static_cast<Eigen::Index>(count));
  for (Eigen::Index k = 0; k < basis.modes_.cols(); ++k) {
    const ZernikeOrder order = zernike_order(static_cast<std::size_t>(k) + 1);
    Eigen::VectorXd column(points);
    for (Eigen::Index p = 0; p < points; ++p) column[p] = optics::zernike(order, rho[p], theta[p]);
    const double before = column.squaredNorm() * scale;
    // Gram–Schmidt, twice: once leaves what rounding adds, a second time removes that too ("twice is enough",
    // Giraud, Langou and Rozložník, Comput. Math. Appl. 50 (2005) 1069).
    const auto done = basis.modes_.leftCols(k);
    for (int pass = 0; pass < 2; ++pass) column -= done * (done.transpose() * column * scale).eval();
    const double left = column.squaredNorm() * scale;
    if (!(left > 1e-8 * before) || k >= points) {
      return failure(ErrorCode::degenerate_aperture,
                     fmt::format("{} points tell only {} modes apart, not {}", points, k, count), "remove");
    }
    basis.modes_.col(k) = column / std::sqrt(left);
  }
  basis.floats_ = basis.modes_.cast<float>();
  return basis;
}

std::vector<double> ModeBasis::coefficients(std::span<const double> map,
                                            std::span<const std::size_t> wanted) const {
  if (map.size() != points())
    throw std::invalid_argument("ModeBasis::coefficients: map and basis differ in points");
  const Eigen::Map<const Eigen::VectorXd> values(map.data(), modes_.rows());
  std::vector<double> found;
  for (const std::size_t k : wanted) {
    found.push_back(modes_.col(column(k)).dot(values) / static_cast<double>(modes_.rows()));
  }
  return found;
}

}  // namespace bentlight::optics
