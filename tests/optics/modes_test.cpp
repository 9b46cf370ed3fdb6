#include "optics/modes.h"

#include <gtest/gtest.h>

#include <Eigen/QR>
#include <numbers>

#include "support/optics_samples.h"

namespace bentlight::optics {

using test::disc;
using test::values_on;

// R. J. Noll, J. Opt. Soc. Am. 66 (1976) 207, table I (from memory): n, m and whether cosine or sine.
TEST(ZernikeOrder, FollowsNollsTable) {
  const std::vector<ZernikeOrder> table = {{0, 0},  {1, 1}, {1, -1}, {2, 0}, {2, -2}, {2, 2}, {3, -1}, {3, 1},
                                           {3, -3}, {3, 3}, {4, 0},  {4, 2}, {4, -2}, {4, 4}, {4, -4}, {5, 1},
                                           {5, -1}, {5, 3}, {5, -3}, {5, 5}, {5, -5}, {6, 0}};
  for (std::size_t j = 1; j <= table.size(); ++j) EXPECT_EQ(zernike_order(j), table[j - 1]) << j;
}

// ANSI Z80.28 and ISO 24157: j = (n (n + 2) + m) / 2, listed to the third order (from memory).
TEST(ZernikeOrder, HasTheIndexOfAnsi) {
  const std::vector<ZernikeOrder> in_order = {{0, 0}, {1, -1}, {1, 1},  {2, -2}, {2, 0},
                                              {2, 2}, {3, -3}, {3, -1}, {3, 1},  {3, 3}};
  for (std::size_t j = 0; j < in_order.size(); ++j) EXPECT_EQ(ansi_index(in_order[j]), j);
}

TEST(ZernikeOrder, NumbersEveryOrderOnceUpToTheTwentieth) {
  std::vector<int> seen(231, 0);
  for (std::size_t j = 1; j <= 231; ++j) ++seen.at(ansi_index(zernike_order(j)));
  EXPECT_EQ(seen, std::vector<int>(231, 1));
}

TEST(ZernikeOrder, BelowOneIsAFault) {
  EXPECT_THROW(zernike_order(0), std::invalid_argument);
}

// The closed forms of Noll's first eleven, methods 2.2.
TEST(Zernike, HasNollsClosedForms) {
  for (const double r : {0.0, 0.3, 0.8, 1.0}) {
    for (const double t : {0.0, 0.7, 2.0, -1.4}) {
      const double r2 = r * r, r3 = r2 * r, r4 = r2 * r2;
      const std::vector<double> expected = {1,
                                            2 * r * std::cos(t),
                                            2 * r * std::sin(t),
                                            std::sqrt(3) * (2 * r2 - 1),
                                            std::sqrt(6) * r2 * std::sin(2 * t),
                                            std::sqrt(6) * r2 * std::cos(2 * t),
                                            std::sqrt(8) * (3 * r3 - 2 * r) * std::sin(t),
                                            std::sqrt(8) * (3 * r3 - 2 * r) * std::cos(t),
                                            std::sqrt(8) * r3 * std::sin(3 * t),
                                            std::sqrt(8) * r3 * std::cos(3 * t),
                                            std::sqrt(5) * (6 * r4 - 6 * r2 + 1)};
      for (std::size_t j = 1; j <= expected.size(); ++j) {
        EXPECT_NEAR(zernike(zernike_order(j), r, t), expected[j - 1], 1e-14) << j;
      }
    }
  }
}

TEST(ModeBasis, IsOrthonormalUnderTheMeanOverPoints) {
  for (const double obscuration : {0.0, 0.5}) {
    const auto basis = ModeBasis::zernike(disc(0.3, 64, obscuration), 231).value();

    const Eigen::MatrixXd products =
        basis.modes().transpose() * basis.modes() / static_cast<double>(basis.points());

    // Two passes of Gram–Schmidt leave rounding only: a few times 1e-16 for sums of three thousand terms.
    EXPECT_LT((products - Eigen::MatrixXd::Identity(231, 231)).cwiseAbs().maxCoeff(), 1e-13);
  }
}

// Householder's QR of the explicit polynomials is another way to the same columns, up to their sign.
TEST(ModeBasis, IsTheQrOfThePolynomialsWithAPositiveDiagonal) {
  const auto aperture = disc(0.3, 48, 0.3);
  const Eigen::Index count = 66, points = static_cast<Eigen::Index>(aperture.points());
  Eigen::MatrixXd polynomials(points, count);
  for (Eigen::Index k = 0; k < count; ++k) {
    const auto column = values_on(aperture, [&](double x, double y) {
      return zernike(zernike_order(static_cast<std::size_t>(k) + 1), std::hypot(x, y) / aperture.radius_m(),
                     std::atan2(y, x));
    });
    polynomials.col(k) = Eigen::Map<const Eigen::VectorXd>(column.data(), points);
  }
  const Eigen::HouseholderQR<Eigen::MatrixXd> qr(polynomials);
  const Eigen::MatrixXd q = qr.householderQ() * Eigen::MatrixXd::Identity(points, count);

  const auto basis = ModeBasis::zernike(aperture, static_cast<std::size_t>(count)).value();

  for (Eigen::Index k = 0; k < count; ++k) {
    const double sign = qr.matrixQR()(k, k) < 0 ? -1 : 1;
    const Eigen::VectorXd expected = sign * std::sqrt(static_cast<double>(points)) * q.col(k);
    // The explicit sum of order ten loses four digits to cancellation.
    EXPECT_LT((basis.modes().col(k) - expected).cwiseAbs().maxCoeff(), 1e-10) << k + 1;
  }
}

TEST(ModeBasis, BeginsWithPistonTipAlongXAndTiltAlongY) {
  const auto aperture = disc(0.2, 64);
  const auto basis = ModeBasis::zernike(aperture, 3).value();
  const double tip_per_m = basis.mode(2)[1] - basis.mode(2)[0];

  EXPECT_GT(tip_per_m, 0.0);
  for (std::size_t p = 0; p < aperture.points(); ++p) {
    EXPECT_NEAR(basis.mode(1)[p], 1.0, 1e-14);
    // Unit variance over the disc: 2 rho cos theta, on the pixels' own second moment.
    EXPECT_NEAR(basis.mode(2)[p], 2 * aperture.x_m()[p] / 0.1, 0.02);
    EXPECT_NEAR(basis.mode(3)[p], 2 * aperture.y_m()[p] / 0.1, 0.02);
  }
}

TEST(ModeBasis, LeavesNothingOfAPlaneOnAnUnevenMask) {
  auto grid = test::disc_grid(0.2, 40, 0.3);
  for (std::size_t i = 0; i < 300; ++i) grid.mask[i] = 0;
  const auto aperture = Aperture::of(grid).value();
  const auto basis = ModeBasis::zernike(aperture, 3).value();
  const auto plane = values_on(aperture, [](double x, double y) { return 3e-4 + 0.7 * x - 1.3 * y; });

  const std::vector<std::size_t> all = {1, 2, 3};
  const auto c = basis.coefficients(plane, all);

  for (std::size_t p = 0; p < plane.size(); ++p) {
    const double left = plane[p] - c[0] - c[1] * basis.mode(2)[p] - c[2] * basis.mode(3)[p];
    EXPECT_NEAR(left, 0.0, 1e-15);  // a plane of 0.2 m in double
  }
}

// methods 2.6: variances over the filled disc follow from mean rho^n = 2 / (n + 2).
TEST(ModeBasis, GivesTheRmsOfSimpleAberrations) {
  const auto aperture = disc(0.2, 256);
  const auto basis = ModeBasis::zernike(aperture, 3).value();
  const auto rms_after = [&](std::vector<std::size_t> removed, auto opd) {
    const auto w = values_on(
        aperture, [&](double x, double y) { return opd(std::hypot(x, y) / 0.1, std::atan2(y, x)); });
    const auto c = basis.coefficients(w, removed);
    double sum = 0;
    for (std::size_t p = 0; p < w.size(); ++p) {
      double left = w[p];
      for (std::size_t i = 0; i < removed.size(); ++i) left -= c[i] * basis.mode(removed[i])[p];
      sum += left * left;
    }
    return std::sqrt(sum / static_cast<double>(w.size()));
  };

  // 256 points across leave a stair-stepped rim: the disc is round to about 1/256.
  const double near = 0.004;
  EXPECT_NEAR(rms_after({1}, [](double r, double) { return r * r; }), 1 / std::sqrt(12), near);
  EXPECT_NEAR(rms_after({1}, [](double r, double t) { return r * std::cos(t); }), 0.5, near);
  EXPECT_NEAR(rms_after({1}, [](double r, double) { return r * r * r * r; }), 2 / (3 * std::sqrt(5)), near);
  EXPECT_NEAR(rms_after({1}, [](double r, double t) { return r * r * r * std::cos(t); }), 1 / std::sqrt(8),
              near);
  EXPECT_NEAR(rms_after({1}, [](double r, double t) { return r * r * std::cos(t) * std::cos(t); }), 0.25,
              near);
}

TEST(ModeBasis, SaysHowManyModesThePointsTellApart) {
  // Nine points carry nine modes at most; on a 3 x 3 grid the tenth is a mixture of those before.
  Grid grid{
      .rows = 3, .columns = 3, .x_m = {-1, 0, 1}, .y_m = {-1, 0, 1}, .mask = std::vector<std::uint8_t>(9, 1)};
  const auto aperture = Aperture::of(grid).value();

  const auto basis = ModeBasis::zernike(aperture, 12);

  ASSERT_FALSE(basis);
  EXPECT_EQ(basis.error().code, ErrorCode::degenerate_aperture);
  // Rank by another decomposition: of the first k polynomials on these points.
  Eigen::Index told_apart = 0;
  for (Eigen::Index k = 1; k <= 12; ++k) {
    Eigen::MatrixXd columns(9, k);
    for (Eigen::Index j = 0; j < k; ++j) {
      for (std::size_t p = 0; p < 9; ++p) {
        const double x = aperture.x_m()[p], y = aperture.y_m()[p];
        columns(static_cast<Eigen::Index>(p), j) =
            zernike(zernike_order(static_cast<std::size_t>(j) + 1), std::hypot(x, y) / aperture.radius_m(),
                    std::atan2(y, x));
      }
    }
    if (columns.colPivHouseholderQr().rank() == k && told_apart == k - 1) told_apart = k;
  }
  EXPECT_NE(basis.error().text.find("only " + std::to_string(told_apart) + " modes"), std::string::npos)
      << basis.error().text;
  EXPECT_TRUE(ModeBasis::zernike(aperture, static_cast<std::size_t>(told_apart)));
}

TEST(ModeBasis, CarriesAllModesOnANarrowAnnulus) {
  EXPECT_TRUE(ModeBasis::zernike(disc(0.3, 128, 0.8), 66));
}

}  // namespace bentlight::optics
