#include "optics/modes.h"

#include <fmt/format.h>

#include <algorithm>
#include <cmath>
#include <map>
#include <stdexcept>
#include <utility>

namespace bentlight::optics {

namespace {

// Share of its own norm that a polynomial must add to those before it. What rounding leaves of one that adds
// nothing is near 1e-15; a narrow annulus needs the digits in between.
constexpr double least_new_share = 1e-7;

// Columns made orthogonal at a time: against all earlier ones by matrix products, among each other one by
// one.
constexpr Eigen::Index block_columns = 16;

/// Values of the polynomials on given points, asked for by ascending radial order.
class ZernikeColumns {
 public:
  ZernikeColumns(const Eigen::ArrayXd& x, const Eigen::ArrayXd& y) : square_(x.square() + y.square()) {
    const Eigen::ArrayXd rho = square_.sqrt();
    // At the center the angle does not matter, since every term with one vanishes there.
    cosines_ = {Eigen::ArrayXd::Ones(x.size()), (rho > 0.0).select(x / rho, 1.0)};
    sines_ = {Eigen::ArrayXd::Zero(x.size()), (rho > 0.0).select(y / rho, 0.0)};
    powers_ = {Eigen::ArrayXd::Ones(x.size()), rho};
  }

  Eigen::ArrayXd column(ZernikeOrder order) {
    const int m = std::abs(order.m);
    grow_to(m);
    const Eigen::ArrayXd& radial = radial_part(order.n, m);
    if (m == 0) return std::sqrt(order.n + 1.0) * radial;
    return std::sqrt(2.0 * (order.n + 1)) * radial *
           (order.m > 0 ? cosines_ : sines_)[static_cast<std::size_t>(m)];
  }

 private:
  /// Cosines and sines of multiples of the angle, and powers of the radius.
  void grow_to(int m) {
    for (std::size_t k = cosines_.size(); k <= static_cast<std::size_t>(m); ++k) {
      cosines_.push_back(2.0 * cosines_[1] * cosines_[k - 1] - cosines_[k - 2]);
      sines_.push_back(2.0 * cosines_[1] * sines_[k - 1] - sines_[k - 2]);
      powers_.push_back(powers_[k - 1] * powers_[1]);
    }
  }

  const Eigen::ArrayXd& radial_part(int n, int m) {
    const auto known = radial_.find({n, m});
    if (known != radial_.end()) return known->second;
    Eigen::ArrayXd values;
    if (n == m) {
      values = powers_[static_cast<std::size_t>(m)];
    } else if (n == m + 2) {
      values = ((m + 2) * square_ - (m + 1)) * powers_[static_cast<std::size_t>(m)];
    } else {
      const double k1 = (n + m) * (n - m) * (n - 2) / 2.0, k2 = 2.0 * n * (n - 1) * (n - 2);
      const double k3 = -double(m * m) * (n - 1) - k2 / 2.0,
                   k4 = -double(n) * (n + m - 2) * (n - m - 2) / 2.0;
      values = ((k2 * square_ + k3) * radial_part(n - 2, m) + k4 * radial_part(n - 4, m)) / k1;
    }
    radial_.erase({n - 6, m});  // out of the recurrence's sight
    return radial_.insert_or_assign({n, m}, std::move(values)).first->second;
  }

  Eigen::ArrayXd square_;
  std::vector<Eigen::ArrayXd> cosines_, sines_, powers_;
  std::map<std::pair<int, int>, Eigen::ArrayXd> radial_;
};

/// Makes columns first … end of `modes` orthonormal among each other, those before being so. Gives the column
/// that adds nothing new, or `end`.
Eigen::Index orthonormalise(Eigen::MatrixXd& modes, Eigen::Index first, Eigen::Index end) {
  const double scale = 1.0 / static_cast<double>(modes.rows());
  const auto done = modes.leftCols(first);
  auto fresh = modes.middleCols(first, end - first);
  Eigen::VectorXd norm = (fresh.colwise().squaredNorm() * scale).transpose();
  // Gram–Schmidt, twice: once leaves what rounding adds, a second time removes that too ("twice is enough",
  // Giraud, Langou and Rozložník, Comput. Math. Appl. 50 (2005) 1069).
  for (int pass = 0; pass < 2; ++pass) {
    fresh -= done * (done.transpose() * fresh * scale).eval();
    for (Eigen::Index k = 0; k < fresh.cols(); ++k) {
      auto column = fresh.col(k);
      const auto before = fresh.leftCols(k);
      column -= before * (before.transpose() * column * scale).eval();
      const double left = column.squaredNorm() * scale;
      if (!(left > least_new_share * least_new_share * norm[k])) return first + k;
      column /= std::sqrt(left);
      norm[k] = 1.0;
    }
  }
  return end;
}

}  // namespace

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
  const Eigen::Map<const Eigen::ArrayXd> x_m(aperture.x_m().data(), points),
      y_m(aperture.y_m().data(), points);
  ZernikeColumns columns((x_m - aperture.center_x_m()) / aperture.radius_m(),
                         (y_m - aperture.center_y_m()) / aperture.radius_m());
  ModeBasis basis;
  basis.modes_.resize(points, static_cast<Eigen::Index>(count));
  for (Eigen::Index first = 0; first < basis.modes_.cols(); first += block_columns) {
    const Eigen::Index end = std::min(first + block_columns, basis.modes_.cols());
    for (Eigen::Index k = first; k < end; ++k) {
      basis.modes_.col(k) = columns.column(zernike_order(static_cast<std::size_t>(k) + 1));
    }
    const Eigen::Index told_apart = orthonormalise(basis.modes_, first, end);
    if (told_apart < end) {
      return failure(ErrorCode::degenerate_aperture,
                     fmt::format("{} points tell only {} modes apart, not {}", points, told_apart, count),
                     "remove");
    }
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
