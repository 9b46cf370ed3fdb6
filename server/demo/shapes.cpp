#include "demo/shapes.h"

#include <cmath>
#include <complex>
#include <numbers>

namespace bentlight::demo {

DemoGrid make_grid(const Scenario& scenario) {
  const std::size_t across = scenario.options.grid;
  const double diameter = scenario.setting.aperture_diameter_m;
  DemoGrid grid;
  grid.across = across;
  grid.step_m = diameter / static_cast<double>(across);
  for (std::size_t i = 0; i < across; ++i) {
    grid.centers_m.push_back((static_cast<double>(i) + 0.5) * grid.step_m - 0.5 * diameter);
  }
  for (const double y : grid.centers_m) {
    for (const double x : grid.centers_m) grid.inside.push_back(std::hypot(x, y) <= 0.5 * diameter ? 1 : 0);
  }
  for (const auto inside : grid.inside) grid.points += inside;
  return grid;
}

std::vector<Wave> pair_waves(const Scenario& scenario) {
  std::vector<Wave> waves = scenario.waves;
  waves.push_back(
      {.kx_rad_m = 2.0 * std::numbers::pi / scenario.roll_up.wavelength_m, .ky_rad_m = 0.0, .share = 1.0});
  return waves;
}

double steady_lensing_m(const SteadyLensing& steady, double x_m, double y_m, double radius_m) {
  const double x = x_m / radius_m, y = y_m / radius_m, squared = x * x + y * y;
  return steady.focus_m * std::sqrt(3.0) * (2.0 * squared - 1.0) +
         steady.astigmatism_m * std::sqrt(6.0) * (x * x - y * y) +
         steady.coma_m * std::sqrt(8.0) * (3.0 * squared - 2.0) * x;
}

namespace {

using Phasors = std::vector<std::complex<double>>;

Phasors phasors(double k_rad_m, const std::vector<double>& centers_m) {
  Phasors values;
  for (const double center : centers_m) values.push_back(std::polar(1.0, k_rad_m * center));
  return values;
}

/// exp(i (kx x + ky y)) is a product, so that a wave needs a sine per row and column and not per point.
void fill_pair(ShapeMatrix& shapes,
               Eigen::Index cosine,
               Eigen::Index sine,
               const Wave& wave,
               const DemoGrid& grid,
               double scale) {
  const Phasors along_x = phasors(wave.kx_rad_m, grid.centers_m),
                along_y = phasors(wave.ky_rad_m, grid.centers_m);
  Eigen::Index point = 0;
  for (const auto& y : along_y) {
    for (const auto& x : along_x) {
      const std::complex<double> value = grid.inside[static_cast<std::size_t>(point)] ? scale * x * y : 0.0;
      shapes(cosine, point) = static_cast<float>(value.real());
      shapes(sine, point) = static_cast<float>(value.imag());
      ++point;
    }
  }
}

}  // namespace

ShapeMatrix shape_matrix(const Scenario& scenario,
                         const DemoGrid& grid,
                         const SteadyLensing& steady,
                         double units_per_metre,
                         float outside) {
  const ShapeOrder order(scenario);
  ShapeMatrix shapes = ShapeMatrix::Zero(order.count(), static_cast<Eigen::Index>(grid.inside.size()));
  const auto waves = pair_waves(scenario);
  for (Eigen::Index pair = 0; pair < order.pairs; ++pair) {
    fill_pair(shapes, pair, order.pairs + pair, waves[static_cast<std::size_t>(pair)], grid, units_per_metre);
  }
  const double radius = 0.5 * scenario.setting.aperture_diameter_m;
  Eigen::Index point = 0;
  for (const double y : grid.centers_m) {
    for (const double x : grid.centers_m) {
      const bool inside = grid.inside[static_cast<std::size_t>(point)] != 0;
      const double steady_here = units_per_metre * steady_lensing_m(steady, x, y, radius);
      shapes(order.steady(), point) = inside ? static_cast<float>(steady_here) : outside;
      if (inside) {
        shapes(order.piston(), point) = static_cast<float>(units_per_metre);
        shapes(order.tip(), point) = static_cast<float>(units_per_metre * x);
        shapes(order.tilt(), point) = static_cast<float>(units_per_metre * y);
      }
      ++point;
    }
  }
  return shapes;
}

}  // namespace bentlight::demo
