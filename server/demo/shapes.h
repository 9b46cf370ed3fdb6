// The shapes over the aperture whose weighted sum is a frame: frames [t, p] = histories [t, s] * shapes [s,
// p].
#pragma once

#include <Eigen/Core>
#include <cstddef>
#include <cstdint>
#include <vector>

#include "demo/scenario.h"

namespace bentlight::demo {

/// A square grid that just holds the aperture's disc; points are cell centers.
struct DemoGrid {
  std::size_t across = 0;
  double step_m = 0.0;
  std::vector<double> centers_m;     // [across], of columns and of rows
  std::vector<std::uint8_t> inside;  // [across * across], row-major
  std::size_t points = 0;            // inside
};

DemoGrid make_grid(const Scenario& scenario);

/// The order of shapes: cosines of all waves and of the roll-up, their sines, then the single shapes.
struct ShapeOrder {
  explicit ShapeOrder(const Scenario& scenario)
      : pairs(static_cast<Eigen::Index>(scenario.waves.size()) + 1) {}
  Eigen::Index pairs;  // the roll-up is the last
  Eigen::Index steady() const { return 2 * pairs; }
  Eigen::Index piston() const { return 2 * pairs + 1; }
  Eigen::Index tip() const { return 2 * pairs + 2; }   // along x
  Eigen::Index tilt() const { return 2 * pairs + 3; }  // along y
  Eigen::Index count() const { return 2 * pairs + 4; }
};

using ShapeMatrix = Eigen::Matrix<float, Eigen::Dynamic, Eigen::Dynamic, Eigen::RowMajor>;

/// Shapes [ShapeOrder::count()][across * across] times `units_per_metre`; outside the disc the steady lensing
/// holds `outside` and all others 0. Tip and tilt are metres of path for a radian.
ShapeMatrix shape_matrix(const Scenario& scenario,
                         const DemoGrid& grid,
                         const SteadyLensing& steady,
                         double units_per_metre,
                         float outside);

/// The steady lensing at a point.
double steady_lensing_m(const SteadyLensing& steady, double x_m, double y_m, double radius_m);

/// The wave numbers of all pairs, the roll-up's last.
std::vector<Wave> pair_waves(const Scenario& scenario);

}  // namespace bentlight::demo
