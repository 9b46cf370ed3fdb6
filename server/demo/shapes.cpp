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
    // Whole numbers of half steps, so that the symmetry is exact.
    const auto half_steps = static_cast<double>(2 * i + 1) - static_cast<double>(across);
    grid.centers_m.push_back(half_steps * 0.5 * grid.step_m);
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
  values.reserve(centers_m.size());
  for (const double center : centers_m) values.push_back(std::polar(1.0, k_rad_m * center));
  return values;
}

/// Calls `take(point, x, y)` for the points of the half grid with the members of two lists, one per column
/// and row.
template <class List, class Take>
void for_half(const DemoGrid& grid, const List& along_x, const List& along_y, const Take& take) {
  const std::size_t count = half_points(grid);
  for (std::size_t point = 0; point < count; ++point) {
    take(point, along_x[point % grid.across], along_y[point / grid.across]);
  }
}

/// exp(i (kx x + ky y)) is a product, so that a wave needs a sine per row and column and not per point.
void fill_pair(float* cosines, float* sines, const Wave& wave, const DemoGrid& grid, double scale) {
  for_half(grid, phasors(wave.kx_rad_m, grid.centers_m), phasors(wave.ky_rad_m, grid.centers_m),
           [&](std::size_t point, const std::complex<double>& x, const std::complex<double>& y) {
             const std::complex<double> value = grid.inside[point] ? scale * x * y : 0.0;
             cosines[point] = static_cast<float>(value.real());
             sines[point] = static_cast<float>(value.imag());
           });
}

}  // namespace

ShapeMatrix half_shapes(const Scenario& scenario,
                        const DemoGrid& grid,
                        const SteadyLensing& steady,
                        double units_per_metre,
                        float outside) {
  const ShapeOrder order(scenario);
  ShapeMatrix shapes = ShapeMatrix::Zero(order.count(), static_cast<Eigen::Index>(half_points(grid)));
  const auto row = [&](Eigen::Index shape) { return shapes.row(shape).data(); };
  const auto waves = pair_waves(scenario);
  for (Eigen::Index pair = 0; pair < order.pairs; ++pair) {
    const Wave& wave = waves[static_cast<std::size_t>(pair)];
    fill_pair(row(order.cosine(pair)), row(order.sine(pair)), wave, grid, units_per_metre);
  }
  const double radius = 0.5 * scenario.setting.aperture_diameter_m;
  for_half(grid, grid.centers_m, grid.centers_m, [&](std::size_t point, double x, double y) {
    if (!grid.inside[point]) {
      row(order.steady_even())[point] = outside;
      return;
    }
    const double here = 0.5 * units_per_metre * steady_lensing_m(steady, x, y, radius);
    const double opposite = 0.5 * units_per_metre * steady_lensing_m(steady, -x, -y, radius);
    row(order.steady_even())[point] = static_cast<float>(here + opposite);
    row(order.steady_odd())[point] = static_cast<float>(here - opposite);
    row(order.piston())[point] = static_cast<float>(units_per_metre);
    row(order.tip())[point] = static_cast<float>(units_per_metre * x);
    row(order.tilt())[point] = static_cast<float>(units_per_metre * y);
  });
  return shapes;
}

void unfold(std::span<const float> even, std::span<const float> odd, std::span<float> frame) {
  float* const last = frame.data() + frame.size() - 1;
  for (std::size_t point = 0; point < even.size(); ++point) {
    frame[point] = even[point] + odd[point];
    *(last - point) = even[point] - odd[point];
  }
}

}  // namespace bentlight::demo
