// The shapes over the aperture whose weighted sum is a frame: frames [t, p] = histories [t, s] * shapes [s,
// p].
//
// The grid is symmetric about the axis, and each shape is even or odd under that reflection (the steady
// lensing is cut into both). So the product is made for half of the points: a point is even + odd, its
// reflection even - odd. That halves the arithmetic, which is what writing a demo archive costs.
#pragma once

#include <Eigen/Core>
#include <cstddef>
#include <cstdint>
#include <span>
#include <vector>

#include "demo/scenario.h"

namespace bentlight::demo {

/// A square grid that just holds the aperture's disc; points are cell centers.
struct DemoGrid {
  std::size_t across = 0;
  double step_m = 0.0;
  std::vector<double> centers_m;     // [across], of columns and of rows; symmetric about 0
  std::vector<std::uint8_t> inside;  // [across * across], row-major
  std::size_t points = 0;            // inside
};

DemoGrid make_grid(const Scenario& scenario);

/// The order of shapes: first the even ones, then the odd ones.
struct ShapeOrder {
  explicit ShapeOrder(const Scenario& scenario)
      : pairs(static_cast<Eigen::Index>(scenario.waves.size()) + 1) {}
  Eigen::Index pairs;  // the waves, and as the last the roll-up
  Eigen::Index cosine(Eigen::Index pair) const { return pair; }
  Eigen::Index steady_even() const { return pairs; }
  Eigen::Index piston() const { return pairs + 1; }
  Eigen::Index even_count() const { return pairs + 2; }
  Eigen::Index sine(Eigen::Index pair) const { return even_count() + pair; }
  Eigen::Index steady_odd() const { return even_count() + pairs; }
  Eigen::Index tip() const { return even_count() + pairs + 1; }   // along x
  Eigen::Index tilt() const { return even_count() + pairs + 2; }  // along y
  Eigen::Index odd_count() const { return pairs + 3; }
  Eigen::Index count() const { return even_count() + odd_count(); }
};

using ShapeMatrix = Eigen::Matrix<float, Eigen::Dynamic, Eigen::Dynamic, Eigen::RowMajor>;

/// Points of the half grid: the first of the row-major grid, with the middle one where the count is odd. The
/// reflection of point p is point across * across - 1 - p.
inline std::size_t half_points(const DemoGrid& grid) {
  return (grid.inside.size() + 1) / 2;
}

/// Shapes [ShapeOrder::count()][half_points()] times `units_per_metre`; outside the disc the steady lensing's
/// even part holds `outside` and all else 0. Tip and tilt are metres of path for a radian.
ShapeMatrix half_shapes(const Scenario& scenario,
                        const DemoGrid& grid,
                        const SteadyLensing& steady,
                        double units_per_metre,
                        float outside);

/// Puts a frame together from the weighted sums of its even and its odd shapes [half_points()].
void unfold(std::span<const float> even, std::span<const float> odd, std::span<float> frame);

/// The steady lensing at a point.
double steady_lensing_m(const SteadyLensing& steady, double x_m, double y_m, double radius_m);

/// The wave numbers of all pairs, the roll-up's last.
std::vector<Wave> pair_waves(const Scenario& scenario);

}  // namespace bentlight::demo
